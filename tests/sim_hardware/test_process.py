"""The simulator as a process: ready line, addresses, clean ends, clear refusals."""

from __future__ import annotations

import os
import signal
import socket
import subprocess
import tomllib
from pathlib import Path

import numpy as np
import pytest
import serial

from profiles.load import load_bench
from sim_hardware.bench_text import bench_text
from tests.sim_hardware.bench_files import bench_toml, command, folder_with, running
from tests.sim_hardware.test_bank import arrays


def ask(port: int, message: bytes) -> bytes:
    with socket.create_connection(("127.0.0.1", port), timeout=60) as client:
        client.sendall(message)
        return client.recv(65_536)


def run(tmp_path: Path, text: str, *options: str, stdin: int | None = None) -> subprocess.CompletedProcess[str]:
    folder, bench = folder_with(tmp_path, text)
    words, environment = command(folder, bench, *options)
    return subprocess.run(words, env=environment, stdin=stdin, capture_output=True, text=True, timeout=60, check=False)


def test_every_instrument_answers_at_the_address_in_the_ready_line(tmp_path: Path) -> None:
    with running(tmp_path, bench_toml()) as simulator:
        assert set(simulator.addresses) == {"oscilloscope", "generator", "stage", "thermometer"}
        assert ask(simulator.port("oscilloscope"), b"*IDN?\n").startswith(b"QUIET BASIN,SCOPE-P,")
        assert ask(simulator.port("generator"), b"*IDN?\n").startswith(b"QUIET BASIN,GENERATOR,")
        assert ask(simulator.port("thermometer"), b"MEAS:TEMP?\n") == b"21.250\n"
        assert ask(simulator.port("stage"), b"$I\n").startswith(b"[VER:QUIET BASIN STAGE-ISO")


@pytest.mark.parametrize("number", [signal.SIGTERM, signal.SIGINT])
def test_a_signal_ends_it_cleanly_and_removes_its_link(tmp_path: Path, number: signal.Signals) -> None:
    with running(tmp_path, bench_toml(stage_address="serial:///tmp/not-taken")) as simulator:
        link = Path(simulator.addresses["stage"].removeprefix("serial://"))
        assert link.is_symlink()
        simulator.process.send_signal(number)
        assert simulator.process.wait(30) == 0
        assert not link.is_symlink()
        assert not link.parent.exists()


def test_pyserial_speaks_to_the_stage_over_the_pseudo_terminal(tmp_path: Path) -> None:
    text = bench_toml(stage="test-stage-prefix", stage_address="serial:///tmp/not-taken")
    with running(tmp_path, text) as simulator:
        device = simulator.addresses["stage"].removeprefix("serial://")
        for _ in range(2):  # a port is opened and closed more than once
            with serial.Serial(device, 115_200, timeout=30, exclusive=True) as stage:
                stage.write(b"VE?\r\n")
                assert stage.readline() == b"QUIET BASIN STAGE-PREFIX 1.0\r\n"
                stage.write(b"1OR;3OR;4OR\r\n1PA2.5;3PA100\r\n1TP?;3TP?;TB?\r\n")
                assert [stage.readline() for _ in range(3)] == [b"2.5000\r\n", b"100.0000\r\n", b"0, NO ERROR\r\n"]


def test_with_parent_it_ends_when_its_standard_input_ends(tmp_path: Path) -> None:
    with running(tmp_path, bench_toml(), ("--with-parent",)) as simulator:
        assert simulator.process.poll() is None
        assert simulator.stdin is not None
        simulator.stdin.close()
        assert simulator.process.wait(30) == 0


def test_without_with_parent_the_end_of_standard_input_is_nothing(tmp_path: Path) -> None:
    with running(tmp_path, bench_toml()) as simulator:
        assert simulator.stdin is not None
        simulator.stdin.close()
        assert ask(simulator.port("generator"), b"OUTP?\n") == b"0\n"
        assert simulator.end() == 0


def test_the_bench_that_it_writes_has_the_addresses_and_not_the_truth(tmp_path: Path) -> None:
    written = tmp_path / "real.toml"
    with running(tmp_path, bench_toml(), ("--write-bench", str(written))) as simulator:
        text = written.read_text()
        assert "simulation" not in text
        document = tomllib.loads(text)
        assert {r: i["address"] for r, i in document["instruments"].items()} == simulator.addresses
        original = load_bench(tmp_path / "bench.toml")
        back = load_bench(written)
        assert back.axes == original.axes
        assert back.keep_out == original.keep_out
        assert back.geometry == original.geometry


def test_a_bench_survives_being_written_with_any_text_in_it(tmp_path: Path) -> None:
    text = bench_toml(simulation="").replace('name = "source"', r'name = "a \"b\" \\ c é \t"')
    _, path = folder_with(tmp_path, text)
    bench = load_bench(path)
    (tmp_path / "again.toml").write_text(bench_text(bench, {}), encoding="utf-8")
    assert load_bench(tmp_path / "again.toml") == bench


def test_the_same_seed_gives_the_same_samples_and_another_does_not(tmp_path: Path) -> None:
    def block(folder: str, seed: str) -> bytes:
        (tmp_path / folder).mkdir()
        with running(tmp_path / folder, bench_toml(), ("--speed", "max", "--seed", seed)) as simulator:
            ask(simulator.port("generator"), b"BURS:STAT ON;:OUTP ON;*OPC?\n")
            port = simulator.port("oscilloscope")
            assert ask(port, b":CHAN1:RANG 0.08;:ACQ:POIN 200;:WAV:FORM WORD;:INIT;*OPC?\n") == b"1\n"
            return ask(port, b":WAV:DATA?\n")

    first = block("one", "5")
    assert block("two", "5") == first
    assert block("three", "6") != first


def test_a_bank_needs_no_truth(tmp_path: Path) -> None:
    np.savez(tmp_path / "bank.npz", **arrays(strict=False))
    text = bench_toml(simulation="")
    options = ("--speed", "max", "--bank", str(tmp_path / "bank.npz"))
    with running(tmp_path, text, options) as simulator:
        ask(simulator.port("generator"), b"BURS:STAT ON;:OUTP ON;*OPC?\n")
        port = simulator.port("oscilloscope")
        assert ask(port, b":WAV:FORM WORD;:INIT;*OPC?\n") == b"1\n"
        counts = np.frombuffer(ask(port, b":WAV:DATA?\n")[5:-1], ">i2")
        np.testing.assert_array_equal(counts, arrays()["counts"][0])


def test_at_a_speed_of_twenty_a_move_takes_its_time(tmp_path: Path) -> None:
    with (
        running(tmp_path, bench_toml(), ("--speed", "20")) as simulator,
        socket.create_connection(("127.0.0.1", simulator.port("stage")), timeout=60) as stage,
        stage.makefile("rb") as replies,
    ):
        stage.sendall(b"$H\n")
        assert replies.readline() == b"ok\n"
        stage.sendall(b"G0 X40\nG4 P0\n?")
        assert replies.readline() == b"ok\n"
        # the report comes at once, the `ok` of the dwell after the motion
        assert replies.readline().startswith(b"<Run|")
        assert replies.readline() == b"ok\n"


REFUSALS = [
    ("unknown instrument", bench_toml(scope="no-such-scope"), (), "no-such-scope"),
    ("instrument of another role", bench_toml(scope="test-generator"), (), "oscilloscope"),
    ("no truth", bench_toml(simulation=""), (), "[simulation]"),
    ("wrong truth", bench_toml(simulation="[simulation]\nseed = -1\n"), (), "simulation.seed"),
    ("no TOML", "kind = ", (), "TOML"),
    ("no such bank", bench_toml(), ("--bank", "/nowhere/bank.npz"), "/nowhere/bank.npz"),
    ("bench not writable", bench_toml(), ("--free-ports", "--write-bench", "/nowhere/x.toml"), "/nowhere/x.toml"),
    ("address of another machine", bench_toml(stage_address="tcp://192.0.2.1:5003"), (), "instruments.stage"),
    ("no port", bench_toml(stage_address="tcp://127.0.0.1:99999"), (), "instruments.stage"),
    ("address without port", bench_toml(stage_address="visa://ASRL1::INSTR"), (), "visa://ASRL1::INSTR"),
    ("link in no folder", bench_toml(stage_address="serial:///nowhere/stage"), (), "/nowhere/stage"),
    ("speed", bench_toml(), ("--speed", "0"), "--speed"),
    ("seed", bench_toml(), ("--seed", "-3"), "--seed"),
]


@pytest.mark.parametrize(("name", "text", "options", "says"), REFUSALS, ids=[r[0] for r in REFUSALS])
def test_what_cannot_be_simulated_is_refused_with_a_clear_line(
    tmp_path: Path, name: str, text: str, options: tuple[str, ...], says: str
) -> None:
    done = run(tmp_path, text, *options)
    assert done.returncode == 2
    assert done.stdout == ""
    assert says in done.stderr
    assert "Traceback" not in done.stderr


def test_a_port_that_is_taken_is_refused_with_a_clear_line(tmp_path: Path) -> None:
    with socket.create_server(("127.0.0.1", 0)) as other:
        port = other.getsockname()[1]
        done = run(tmp_path, bench_toml(stage_address=f"tcp://127.0.0.1:{port}"))
    assert done.returncode == 2
    assert "cannot be taken" in done.stderr
    assert "Traceback" not in done.stderr


def test_with_parent_needs_an_input_that_can_end(tmp_path: Path) -> None:
    plain = tmp_path / "plain"
    plain.write_text("x")
    descriptor = os.open(plain, os.O_RDONLY)
    try:
        done = run(tmp_path, bench_toml(), "--free-ports", "--with-parent", stdin=descriptor)
    finally:
        os.close(descriptor)
    assert done.returncode == 2
    assert "--with-parent" in done.stderr


def test_the_ready_line_is_all_that_it_says(tmp_path: Path) -> None:
    with running(tmp_path, bench_toml(), ()) as simulator:
        simulator.process.terminate()
        assert simulator.process.stdout is not None
        assert simulator.process.stdout.read() == ""
