"""Clients that know nothing of this project read the simulated oscilloscope: PyVISA, and Debian's lxi-tools."""

from __future__ import annotations

import shutil
import socket
import subprocess
from collections.abc import Iterator

import numpy as np
import pytest

from tests.sim_hardware.bench_files import Simulator, bench_toml, running

pyvisa = pytest.importorskip("pyvisa")


@pytest.fixture(scope="module", params=["test-scope-p", "test-scope-c"])
def simulator(request: pytest.FixtureRequest, tmp_path_factory: pytest.TempPathFactory) -> Iterator[Simulator]:
    with running(tmp_path_factory.mktemp("bench"), bench_toml(scope=request.param)) as started:
        with socket.create_connection(("127.0.0.1", started.port("generator")), timeout=10) as generator:
            generator.sendall(b"FREQ 2MHZ;BURS:NCYC 6;STAT ON;:OUTP ON;*OPC?\n")
            assert generator.recv(16) == b"1\n"
        yield started


def test_plain_pyvisa_reads_identity_error_queue_and_a_block(simulator: Simulator) -> None:
    manager = pyvisa.ResourceManager("@py")
    scope = manager.open_resource(
        f"TCPIP::127.0.0.1::{simulator.port('oscilloscope')}::SOCKET",
        read_termination="\n",
        write_termination="\n",
        timeout=30_000,
    )
    try:
        scope.write("*RST;*CLS")
        identity = scope.query("*IDN?").split(",")
        assert identity[0] == "QUIET BASIN"
        assert len(identity) == 4  # IEEE 488.2, 10.14: four fields
        scope.write("NONSENSE")
        assert scope.query("SYST:ERR?").startswith('-113,"Undefined header')
        assert scope.query("SYST:ERR?") == '0,"No error"'
        if identity[1] == "SCOPE-P":
            scope.write(":ACQ:POIN 4000;:WAV:FORM WORD;BYT MSBF;UNS 0")
            assert scope.query(":INIT;*OPC?") == "1"
            question = ":WAV:DATA?"
        else:
            scope.write("HEAD 0;:HOR:RECO 4000;:DAT:WID 2;ENC RIB;STAR 1;STOP 4000")
            assert scope.query("ACQ:STATE RUN;*OPC?") == "1"
            question = "CURV?"
        counts = scope.query_binary_values(question, datatype="h", is_big_endian=True, container=np.array)
        assert counts.shape == (4000,)
        assert scope.query("SYST:ERR?") == '0,"No error"'
    finally:
        scope.close()
        manager.close()


@pytest.mark.skipif(shutil.which("lxi") is None, reason="the program lxi (Debian package lxi-tools) is not installed")
def test_lxi_tools_reads_identity_error_queue_and_a_block(simulator: Simulator) -> None:
    def ask(message: str) -> bytes:
        words = ["lxi", "scpi", "-a", "127.0.0.1", "-p", str(simulator.port("oscilloscope")), "-r", message]
        return subprocess.run(words, capture_output=True, timeout=60, check=True).stdout

    identity = ask("*IDN?")
    assert identity.startswith(b"QUIET BASIN,SCOPE-")
    ask("*RST;*CLS")
    ask("NONSENSE")
    assert ask("SYST:ERR?").startswith(b'-113,"Undefined header')
    assert ask("SYST:ERR?") == b'0,"No error"\n'
    if b"SCOPE-P" in identity:
        ask(":ACQ:POIN 300;:WAV:FORM BYTE")
        assert ask(":INIT;*OPC?") == b"1\n"
        block = ask(":WAV:DATA?")
    else:
        ask("HEAD 0;:HOR:RECO 300;:DAT:WID 1;STAR 1;STOP 300")
        assert ask("ACQ:STATE RUN;*OPC?") == b"1\n"
        block = ask("CURV?")
    assert block.startswith(b"#3300")  # IEEE 488.2, 8.7.9: digits of the length, the length, the bytes
    assert len(block) == 5 + 300 + 1
    assert ask("SYST:ERR?") == b'0,"No error"\n'
