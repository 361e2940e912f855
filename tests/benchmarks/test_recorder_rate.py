"""From the hand-over of a point to its durable place in the store, beside what cannot be left out.

That is a bare loop that appends the counts to a file and makes them durable now and then, and the reduction and the
checks on points in memory.
"""

import os
import sys
import time
from dataclasses import dataclass
from pathlib import Path

import numpy as np
import psutil
import pytest
from numpy.typing import NDArray
from threadpoolctl import threadpool_limits

from acquire.judge import Judge
from acquire.recorder import Recorder
from acquire.store import open_stored
from checks.comb import comb_lines
from checks.observation import Circumstances, Gate
from tests.acquire.making import DRIVE_HZ, START_S, circumstances, header, record_of

SAMPLES = 10_000
INTERVAL_S = 4e-9
HIGHEST_HZ = 50e6
FEW, MANY = 500, 5_000
EACH = 3_300  # points of a round; some 10,000 in all
POLL_EVERY = 16
SYNC_EVERY = 64
ROUNDS = 3
SLOWER_THAN_BOTH = 2.0
GROWTH = 1.25  # what a shared machine leaves of "the same"
MEMORY_GROWTH = 1.25  # of the recorder alone: heap in use by the libraries
WEIGH_S = 0.2


def waveforms() -> list[NDArray[np.int16]]:
    """Bursts with harmonics and noise, 12 significant bits."""
    rng = np.random.default_rng(1)
    t = START_S + np.arange(SAMPLES) * INTERVAL_S
    inside = (t > 83e-6) & (t < 83e-6 + 8 / DRIVE_HZ)
    wave = sum(np.sin(2 * np.pi * n * DRIVE_HZ * t) / n for n in range(1, 13)) * inside
    return [(9_000 * (wave + 0.01 * rng.standard_normal(SAMPLES))).astype(np.int16) & ~15 for _ in range(32)]


def about(points: int) -> Circumstances:
    """The circumstances of these waveforms."""
    return circumstances(
        points,
        frequencies_hz=comb_lines(DRIVE_HZ, HIGHEST_HZ, 1 / INTERVAL_S),
        highest_wanted_hz=HIGHEST_HZ,
        sample_interval_s=INTERVAL_S,
        gate=Gate(1000, 6000, 0, 900),
    )


@dataclass(frozen=True)
class Timed:
    """Seconds of a point, seconds of the recorder's processor for it, and the recorder's largest memory, bytes."""

    each_s: float
    processor_s: float
    memory: int


def recorded(store: Path, points: int, waves: list[NDArray[np.int16]]) -> Timed:
    """Hand over, poll, and wait until the last point is durable in a sealed store."""
    records = [record_of(i, points, interval_s=INTERVAL_S) for i in range(points)]
    with Recorder(store, header(), about(points), "int16", SAMPLES, points) as recorder:
        process = psutil.Process().children()[0]
        start, busy, most, weigh_at = time.perf_counter(), processor_s(process), 0, 0.0
        for i, record in enumerate(records):
            recorder.put(record, waves[i % len(waves)])
            if i % POLL_EVERY == 0:
                recorder.poll()
            if time.perf_counter() > weigh_at:
                weigh_at = time.perf_counter() + WEIGH_S
                most = max(most, process.memory_full_info().uss)
        busy = processor_s(process) - busy
        most = max(most, process.memory_full_info().uss)
        recorder.finish(sealed=True)
        return Timed((time.perf_counter() - start) / points, busy / points, most)


def processor_s(process: psutil.Process) -> float:
    times = process.cpu_times()
    return float(times.user + times.system)


def appended(file: Path, points: int, waves: list[NDArray[np.int16]]) -> float:
    """Seconds of a point in a bare loop that keeps the counts durable, and nothing else."""
    start = time.perf_counter()
    with file.open("wb", buffering=0) as out:
        for i in range(points):
            out.write(waves[i % len(waves)].data)
            if i % SYNC_EVERY == SYNC_EVERY - 1:
                os.fdatasync(out.fileno())
        os.fdatasync(out.fileno())
    return (time.perf_counter() - start) / points


def judged(points: int, waves: list[NDArray[np.int16]]) -> float:
    """Seconds of a point for reduction and checks, in memory."""
    judge = Judge(about(points))
    records = [record_of(i, points, interval_s=INTERVAL_S) for i in range(points)]
    start = time.perf_counter()
    with threadpool_limits(1, "blas"):
        for first in range(0, points, POLL_EVERY):
            part = records[first : first + POLL_EVERY]
            judge.take(part, [waves[r.index % len(waves)] for r in part])
    return (time.perf_counter() - start) / points


@pytest.mark.slow
@pytest.mark.timeout(300)
def test_a_point_recorded_costs_little_more_than_appending_and_judging_it(tmp_path: Path) -> None:
    waves = waveforms()
    timed, bare, judging = [], [], []
    for i in range(ROUNDS):
        bare.append(appended(tmp_path / f"{i}.bin", EACH, waves))
        timed.append(recorded(tmp_path / f"{i}.zarr", EACH, waves))
        judging.append(judged(EACH, waves))
        assert len(open_stored(tmp_path / f"{i}.zarr").records) == EACH
    each, append, judge = min(t.each_s for t in timed), min(bare), min(judging)
    sys.stdout.write(
        f"recorded, reduced and judged: {1 / each:.0f} points/s, {min(t.processor_s for t in timed) * 1e6:.0f} us of "
        f"the recorder's processor a point; bare append: {1 / append:.0f} points/s, ratio {each / append:.1f}; "
        f"judged in memory: {1 / judge:.0f} points/s; ratio to both {each / (append + judge):.2f}\n"
    )
    assert each < SLOWER_THAN_BOTH * (append + judge)


@pytest.mark.slow
@pytest.mark.timeout(300)
def test_a_point_costs_no_more_time_or_memory_in_a_long_scan_than_in_a_short_one(tmp_path: Path) -> None:
    waves = waveforms()
    short, long = [], []
    for i in range(ROUNDS):
        short.append(recorded(tmp_path / f"short-{i}.zarr", FEW, waves))
        long.append(recorded(tmp_path / f"long-{i}.zarr", MANY, waves))
    few, many = min(t.each_s for t in short), min(t.each_s for t in long)
    light, heavy = max(t.memory for t in short), max(t.memory for t in long)
    sys.stdout.write(
        f"{FEW} points: {few * 1e6:.0f} us a point, {light / 2**20:.0f} MiB; "
        f"{MANY} points: {many * 1e6:.0f} us a point, {heavy / 2**20:.0f} MiB\n"
    )
    assert many < GROWTH * few
    assert heavy < MEMORY_GROWTH * light
