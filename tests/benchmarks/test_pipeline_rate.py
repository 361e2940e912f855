"""The whole pipeline beside a bare loop, on one simulated bench that answers at once; and how cost grows with length.

The bare loop moves, triggers and reads into memory with PyVISA as it comes. The pipeline does that too, and reads
positions before and after, waits until the stage stands still, judges and stores. Rounds alternate, so that both
meet the same machine. `python -m tests.benchmarks.test_pipeline_rate` runs the long comparison alone.
"""

from __future__ import annotations

import sys
import tempfile
from pathlib import Path
from statistics import median

import pytest

from tests.benchmarks.bench_setup import bare_loop, fast_bench, whole_pipeline

ROUNDS = 3
GOAL = 1.5  # points per second of the pipeline over those of the bare loop, on a machine with nothing else to do
RATIO = 1.0  # asserted: never slower than the bare loop; both share two cores with the simulator
GROWTH = 1.1  # seconds per point of the long scan over those of the short one
MEMORY = 1.2  # likewise peak memory, which levels off: the aim is 1.1


@pytest.mark.slow
@pytest.mark.timeout(300)
def test_the_pipeline_is_faster_than_a_bare_loop(tmp_path: Path) -> None:
    with fast_bench(tmp_path) as bench:
        pairs = [(bare_loop(bench, 1000).rate, whole_pipeline(bench, tmp_path, 5000).rate) for _ in range(ROUNDS)]
    for bare, whole in pairs:
        sys.stdout.write(f"bare loop {bare:.0f} points/s, whole pipeline {whole:.0f} points/s, {whole / bare:.2f}\n")
    ratio = median(whole / bare for bare, whole in pairs)
    sys.stdout.write(f"median {ratio:.2f}, goal {GOAL}\n")
    assert ratio >= RATIO


@pytest.mark.slow
@pytest.mark.timeout(400)
def test_time_and_memory_per_point_do_not_grow_with_the_scan(tmp_path: Path) -> None:
    with fast_bench(tmp_path) as bench:
        whole_pipeline(bench, tmp_path, 500)  # caches of the file system and the interpreter
        short = [whole_pipeline(bench, tmp_path, 500) for _ in range(ROUNDS)]
        long = whole_pipeline(bench, tmp_path, 10_000)
    per_point = (1 / long.rate) / median(1 / s.rate for s in short)
    memory = long.memory / median(s.memory for s in short)
    sys.stdout.write(f"10,000 points over 500: time per point {per_point:.2f}, peak memory {memory:.2f}\n")
    assert per_point <= GROWTH
    assert memory <= MEMORY


if __name__ == "__main__":
    with tempfile.TemporaryDirectory() as name:
        test_the_pipeline_is_faster_than_a_bare_loop(Path(name))
