"""A simulated bench that answers at once from a bank prepared beforehand, and the loops that are timed on it."""

from __future__ import annotations

import os
import time
from collections.abc import Iterator
from contextlib import contextmanager
from dataclasses import dataclass
from pathlib import Path
from typing import Any

import numpy as np
import psutil
import pyvisa

from acquire.bench_file import write_bench
from acquire.client import Client
from acquire.messages import RunScan
from acquire.processes import daemon, simulated_bench
from profiles.bench import Bench
from profiles.load import FOLDER_VARIABLE, load_bench, load_scan, load_sensor, load_source, shipped_folder

SAMPLES = 10_000
WAVEFORMS = 64
INTERVAL_S = 4e-9
RUN_S = 900.0


def write_bank(path: Path) -> None:
    """Tone bursts with harmonics, the noise different from point to point: an element that hears alike from everywhere.

    They are served in turn whatever the pose, so nothing in them may depend on it.
    """
    rng = np.random.default_rng(1)
    start = 0.120 / 1486.0 - 4e-6
    t = start + np.arange(SAMPLES) * INTERVAL_S
    inside = (t > 0.120 / 1486.0) & (t < 0.120 / 1486.0 + 12 / 2.25e6)
    wave = sum(np.sin(2 * np.pi * 2.25e6 * n * t) / n for n in range(1, 13)) * inside
    counts = np.stack([12_000 * (wave + 0.01 * rng.standard_normal(SAMPLES)) for _ in range(WAVEFORMS)])
    full = np.full(WAVEFORMS, 1.0)
    poses = np.zeros((WAVEFORMS, 5))
    np.savez(
        path,
        carriage=poses,
        reported_before=poses,
        reported_after=poses,
        counts=counts.astype(np.int16),
        volts_per_count=full * 0.4 / 65536,
        volts_at_zero=full * 0,
        interval_s=full * INTERVAL_S,
        start_s=full * start,
        full_scale_v=full * 0.4,
        averages=np.ones(WAVEFORMS, np.int64),
        lowest=-32768,
        highest=32767,
        temperature_c=full * 21.0,
        strict=False,
    )


@contextmanager
def fast_bench(folder: Path) -> Iterator[Path]:
    """The bench file of a running simulator in bank mode, with a stage that needs no settling."""
    profiles = folder / "profiles"
    (profiles / "instruments").mkdir(parents=True)
    stage = (shipped_folder() / "instruments" / "stage-iso.toml").read_text()
    (profiles / "instruments" / "stage-iso.toml").write_text(stage.replace("settle_ms = 12\n", ""))
    before = os.environ.get(FOLDER_VARIABLE)
    os.environ[FOLDER_VARIABLE] = str(profiles)
    bank, bench = folder / "bank.npz", folder / "source.toml"
    write_bank(bank)
    write_bench(with_stage_on_tcp(load_bench("demo-tank")), bench)
    try:
        with simulated_bench(bench, folder, "--speed", "max", "--bank", str(bank)) as reached:
            yield reached
    finally:
        if before is None:
            os.environ.pop(FOLDER_VARIABLE)
        else:
            os.environ[FOLDER_VARIABLE] = before


def with_stage_on_tcp(bench: Bench) -> Bench:
    """The stage on a socket: a pseudo-terminal is slower than either, and would hide the difference."""
    stage = bench.instruments["stage"].model_copy(update={"address": "tcp://127.0.0.1:5028"})
    return bench.model_copy(update={"instruments": bench.instruments | {"stage": stage}})


def scan_of(points: int, store: Path) -> RunScan:
    """A rotation over that many points (one way, so that the moves are as short as in the bare loop)."""
    scan = load_scan("demo-rotation").model_dump(mode="json")
    scan["rotation"] = {"span_deg": 90.0, "step_deg": 1.0, "order": "one-way", "repeats": -(-points // 91)}
    scan["capture"] = {"averages": 1, "sample_rate_mhz": 250.0, "points": SAMPLES, "full_scale_v": 0.4}
    scan |= {"revisit_every": 0, "hold_on": []}
    return RunScan(
        scan=scan,
        sensor=load_sensor(scan["sensor"]).model_dump(mode="json"),
        source=load_source(scan["source"]).model_dump(mode="json"),
        store=str(store),
    )


@dataclass(frozen=True)
class Timed:
    """Points of a run, the seconds that they took, and the largest memory of daemon and recorder together, bytes."""

    points: int
    seconds: float
    memory: int

    @property
    def rate(self) -> float:
        """Points per second."""
        return self.points / self.seconds


def whole_pipeline(bench: Path, folder: Path, points: int) -> Timed:
    """Move, capture, transfer, judge and store through the daemon; from its first point to the sealed store."""
    endpoint = f"ipc://{folder / f'd{points}.socket'}"
    with daemon(bench, endpoint), Client(endpoint) as client:
        family = [p for p in psutil.process_iter(["cmdline"]) if endpoint in (p.info["cmdline"] or [])][:1]
        client.ask(scan_of(points, folder / f"scan-{points}-{time.monotonic_ns()}.zarr"))
        begun = None
        most = 0
        deadline = time.monotonic() + RUN_S
        while time.monotonic() < deadline:
            status = client.status()
            if status.done and begun is None:
                begun, first = time.perf_counter(), status.done
            if len(family) < 2:  # the recorder comes a little later
                family += family[0].children()
            most = max(most, sum(memory_of(p) for p in family))
            if status.state in ("sealed", "broken-off", "failed"):
                break
            time.sleep(0.05)
        if status.state != "sealed" or begun is None:
            raise RuntimeError(f"the scan ended {status.state}")
        return Timed(status.planned - first, time.perf_counter() - begun, most)


def memory_of(process: psutil.Process) -> int:
    """Resident memory, bytes; cheap enough to be asked often."""
    try:
        return int(process.memory_info().rss)
    except psutil.NoSuchProcess:
        return 0


def bare_loop(bench: Path, points: int) -> Timed:
    """What a short script does: move, trigger, read into memory, with PyVISA as it comes."""
    instruments = load_bench(bench).instruments
    manager = pyvisa.ResourceManager("@py")
    scope, generator, stage = (
        socket_of(manager, instruments[r].address) for r in ("oscilloscope", "generator", "stage")
    )
    kept = []
    try:
        generator.write("SOUR:FREQ 2.25E6;VOLT 10;BURS:NCYC 12;INT:PER 0.002;:SOUR:BURS:STAT ON;:OUTP ON")
        generator.query("*OPC?")
        if stage.query("$H") != "ok":
            raise RuntimeError("the stage was not homed")
        scope.write(":ACQ:POIN 10000;SRAT 250E6;:CHAN1:RANG 0.4;:WAV:FORM WORD;BYT MSBF;UNS 0")
        begun = time.perf_counter()
        for i in range(points):
            if stage.query(f"G90 G21 G0 X0.0000 Y0.0000 Z120.0000 B{i % 91 - 45:.4f} C0.0000") != "ok":
                raise RuntimeError("the stage refused a move")
            scope.query(":INIT;*OPC?")
            kept.append(scope.query_binary_values(":WAV:DATA?", "h", is_big_endian=True, container=np.array))
        seconds = time.perf_counter() - begun
        generator.write("OUTP OFF")
        generator.query("*OPC?")
    finally:
        for resource in (scope, generator, stage):
            resource.close()
    if len(kept) != points or any(w.size != SAMPLES for w in kept):
        raise RuntimeError("the bare loop lost waveforms")
    return Timed(points, seconds, 0)


def socket_of(manager: pyvisa.ResourceManager, address: str) -> Any:
    """A socket resource with the terminations that most scripts set."""
    host, port = address.removeprefix("tcp://").split(":")
    resource: Any = manager.open_resource(f"TCPIP::{host}::{port}::SOCKET")
    resource.read_termination = resource.write_termination = "\n"
    return resource
