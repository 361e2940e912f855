"""How fast the simulated tank is, against a piece of work that every record needs anyway.

On a quiet core a transform of 10,000 single-precision samples takes some 50 microseconds; 40 of them are 2 ms, in
which one core would give 500 different waveforms per second.
"""

import sys
import time
from collections.abc import Callable
from functools import partial

import numpy as np
import pytest
from scipy.fft import rfft

from sim_hardware.capture import CaptureRequest, Carriage, DriveState
from sim_hardware.tank import SimulatedTank
from sim_hardware.truth import Echo, ElementTruth, SourceTruth, TankTruth, Truth

POINTS = 10_000
ROUNDS = 8
PER_ROUND = 25
LIMIT_IN_TRANSFORMS = 40  # of some 50 us: 500 captures a second


@pytest.mark.parametrize("radius_mm", [0.2, 0.5])
def test_a_capture_costs_less_than_40_transforms_of_its_length(radius_mm: float) -> None:
    truth = Truth(
        source=SourceTruth(),
        element=ElementTruth(radius_mm=radius_mm),
        tank=TankTruth(echoes=(Echo(extra_path_mm=30, level=0.02),)),
    )
    tank = SimulatedTank(truth)
    drive = DriveState(on=True, frequency_hz=2.25e6, amplitude_v=10, cycles=8, repetition_s=1e-3)

    def capture(number: int) -> None:
        theta = np.radians(-60 + 120 * (number % 200) / 199)
        place = (Carriage(0, 0, 0.12, float(theta), 0),)
        tank.voltage(CaptureRequest(number, number * 0.1, place, drive, 250e6, POINTS, 70e-6, 16))

    for number in (0, 100, 199):
        capture(number)
    wave = np.random.default_rng(0).standard_normal(POINTS).astype(np.float32)
    captures, transforms = [], []
    for number in range(ROUNDS):
        first = number * PER_ROUND
        captures.append(elapsed(partial(captured, capture, first)))
        transforms.append(elapsed(lambda: [rfft(wave) for _ in range(4 * PER_ROUND)]) / 4)
    capture_s, transform_s = min(captures) / PER_ROUND, min(transforms) / PER_ROUND
    rate, ratio = 1 / capture_s, capture_s / transform_s
    sys.stdout.write(f"radius {radius_mm} mm: {rate:.0f} waveforms/s on one core, {ratio:.1f} transforms each\n")
    assert capture_s < LIMIT_IN_TRANSFORMS * transform_s


def captured(capture: Callable[[int], None], first: int) -> None:
    """One round of captures."""
    for number in range(first, first + PER_ROUND):
        capture(number)


def elapsed(work: Callable[[], object]) -> float:
    """Seconds that a call takes."""
    start = time.perf_counter()
    work()
    return time.perf_counter() - start
