"""What the reduction of a point costs, against one transform of the same samples."""

import sys
import time
from collections.abc import Callable

import numpy as np
import pytest
from numpy.typing import NDArray
from scipy.fft import rfft
from threadpoolctl import threadpool_limits

from checks.observation import Gate, Pose
from checks.reduce import ROWS, PointMeta, Reducer
from tests.checks.synthetic import DRIVE_HZ, circumstances

SAMPLES = 10_000
ROUNDS = 30
HERE = Pose(0, 0, 0.12)


def meta(index: int) -> PointMeta:
    return PointMeta(index, False, 0, HERE, HERE, HERE, 0.0, 20.0, 1e-6, 0.0, -32768, 32767)


def counts_with_a_burst(start: int, stop: int) -> NDArray[np.int16]:
    counts = np.random.default_rng(1).normal(0, 30, (ROWS, SAMPLES))
    t = np.arange(SAMPLES) * 4e-9
    burst = (np.arange(SAMPLES) >= start) & (np.arange(SAMPLES) < stop)
    volts: NDArray[np.int16] = (counts + 2e4 * np.cos(2 * np.pi * DRIVE_HZ * t) * burst).astype(np.int16)
    return volts


def elapsed(work: Callable[[], object]) -> float:
    start = time.perf_counter()
    work()
    return time.perf_counter() - start


# the shipped scans gate some 1,600 to 2,500 samples; with all of a record in the gate the product with 36 columns
# is the larger part, and does as many operations as the machine can
@pytest.mark.parametrize(
    ("start", "stop", "limit"), [(800, 2400, 1.5), (1000, 9800, 3.0)], ids=["burst", "all-of-the-record"]
)
def test_eight_points_are_reduced_for_little_more_than_their_transforms(start: int, stop: int, limit: float) -> None:
    c = circumstances(gate=Gate(start, stop, 50, start - 75))
    block = counts_with_a_burst(start, stop)
    rows, metas = list(block), [meta(i) for i in range(ROWS)]
    reducer = Reducer(c)
    with threadpool_limits(1):  # as in the recorder
        reductions, transforms = [], []
        for _ in range(ROUNDS):
            reductions.append(elapsed(lambda: reducer.reduce(rows, metas)))
            transforms.append(elapsed(lambda: rfft(block.astype(np.float32), axis=1, workers=1)))
    reduced, transformed = min(reductions), min(transforms)
    ratio = reduced / transformed
    sys.stdout.write(
        f"gate of {stop - start} samples: {reduced / ROWS * 1e6:.0f} us a point, transform "
        f"{transformed / ROWS * 1e6:.0f} us, ratio {ratio:.2f}\n"
    )
    assert ratio <= limit
