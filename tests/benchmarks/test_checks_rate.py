"""What the live checks cost a point, beside one transform of a point's record, and that it does not grow."""

import sys
import time
import tracemalloc
from collections.abc import Iterator
from dataclasses import replace

import numpy as np

from checks.finding import Check
from checks.live import make_checks
from checks.observation import Observation
from tests.checks.synthetic import Truth, rotation

LINES = 40
SAMPLES = 10_000
EARLY, LATE = 200, 20_000
STRETCH = 160  # points timed at a time
ROUNDS = 7
LIMIT_IN_TRANSFORMS = 4.0  # a transform of this length takes some 50 to 100 microseconds on a quiet core
GROWTH = 1.25  # what a shared machine leaves of "the same"


def endless(seen: list[Observation]) -> Iterator[Observation]:
    """The same scan again and again, with the places in the order going on."""
    index = 0
    while True:
        for observation in seen:
            yield replace(observation, index=index)
            index += 1


def elapsed(checks: list[Check], points: list[Observation]) -> float:
    """Seconds for all checks to see the points."""
    start = time.perf_counter()
    for observation in points:
        for check in checks:
            for _ in check.update(observation):
                pass
    return time.perf_counter() - start


def transforms(wave: np.ndarray, count: int) -> float:
    """Seconds for that many transforms."""
    start = time.perf_counter()
    for _ in range(count):
        np.fft.rfft(wave)
    return time.perf_counter() - start


def advanced_to(point: int) -> tuple[list[Check], Iterator[Observation]]:
    """Checks of a long scan that have seen so many points of a bench with a pivot offset and a drift."""
    truth = Truth(pivot_x_m=0.2e-3, pivot_z_m=-0.3e-3, drift_db=0.2)
    circumstances, seen = rotation(truth, seed=1, lines=LINES)
    checks = make_checks(replace(circumstances, planned_points=LATE + ROUNDS * STRETCH))
    points = endless(seen)
    for observation in (next(points) for _ in range(point)):
        for check in checks:
            list(check.update(observation))
    return checks, points


def test_the_checks_cost_a_few_transforms_at_the_first_points_and_no_more_at_the_last() -> None:
    early, late = advanced_to(EARLY), advanced_to(LATE)
    wave = np.random.default_rng(0).standard_normal(SAMPLES).astype(np.float32)
    times: dict[str, list[float]] = {"early": [], "late": [], "transform": []}
    for _ in range(ROUNDS):
        for name, (checks, points) in (("early", early), ("late", late)):
            times[name].append(elapsed(checks, [next(points) for _ in range(STRETCH)]) / STRETCH)
        times["transform"].append(transforms(wave, STRETCH) / STRETCH)
    first, last, transform = (min(times[name]) for name in ("early", "late", "transform"))
    sys.stdout.write(
        f"all checks, {LINES} lines: {first * 1e6:.0f} us a point at {EARLY}, {last * 1e6:.0f} us at {LATE}; "
        f"a transform {transform * 1e6:.0f} us: {last / transform:.2f} transforms\n"
    )
    assert last < LIMIT_IN_TRANSFORMS * transform
    assert last < GROWTH * first


def test_the_checks_keep_no_more_after_many_points_than_after_few() -> None:
    checks, points = advanced_to(EARLY)
    tracemalloc.start()
    try:
        elapsed(checks, [next(points) for _ in range(STRETCH)])
        few = tracemalloc.get_traced_memory()[0]
        for _ in range(10):
            elapsed(checks, [next(points) for _ in range(STRETCH)])
        many = tracemalloc.get_traced_memory()[0]
    finally:
        tracemalloc.stop()
    assert many - few < 16 * 1024
