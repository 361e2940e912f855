"""Whole and half cycles of the arrival: large offsets, short bursts, noise that hides the group delay."""

from dataclasses import replace

import numpy as np
import pytest
from numpy.typing import NDArray

from checks.arrival import Arrival, ArrivalTracker
from checks.observation import Circumstances, Observation
from tests.checks.synthetic import DRIVE_HZ, SPEED, Truth, circumstances, rotation

CYCLE = 1 / DRIVE_HZ


def with_cycles(cycles: int, c: Circumstances, seen: list[Observation]) -> tuple[Circumstances, list[Observation]]:
    """The same arrivals as a burst of so many cycles shows them: side lines elsewhere, in their true phase."""
    sides = DRIVE_HZ * np.array([1 - 0.25 / cycles, 1 + 0.25 / cycles])
    old = c.side_lines_hz
    changed = []
    for o in seen:
        # a common delay: the phase is linear in frequency between and beside the lines
        slope = np.angle(o.side_components[1] * np.conj(o.side_components[0])) / (old[1] - old[0])
        phase = np.angle(o.components[0]) + slope * (sides - DRIVE_HZ)
        changed.append(replace(o, side_components=np.abs(o.components[0]) * np.exp(1j * phase)))
    return replace(c, side_lines_hz=sides, cycles=cycles), changed


def apart(truth: Truth, seen: list[Observation], arrivals: list[Arrival]) -> NDArray[np.float64]:
    """Found less expected arrival against the first point, in cycles, where usable."""
    theta = np.array([o.commanded.theta for o in seen])
    along = truth.pivot_z_m * (np.cos(theta) - 1) - truth.pivot_x_m * np.sin(theta)
    times = np.array([a.time_s for a in arrivals])
    error = times - times[0] - (along - along[0]) / SPEED
    return np.asarray(error[[a.usable for a in arrivals]] / CYCLE)


@pytest.mark.parametrize("lag_us", np.linspace(0.0, 9.0, 19))
@pytest.mark.parametrize(("x_mm", "z_mm"), [(-1.0, 0.9), (2.0, 0.0)])
def test_wherever_the_gate_begins_no_period_is_lost(lag_us: float, x_mm: float, z_mm: float) -> None:
    truth = Truth(pivot_x_m=x_mm * 1e-3, pivot_z_m=z_mm * 1e-3, jitter_s=0.0)
    c, seen = rotation(truth, 1, step=4.0)
    tracker = ArrivalTracker(replace(c, record_start_s=c.record_start_s - lag_us * 1e-6))
    assert np.abs(apart(truth, seen, [tracker.update(o) for o in seen])).max() < 0.02


@pytest.mark.parametrize("cycles", [2, 3, 5, 20])
def test_short_bursts_lean_on_the_neighbours(cycles: int) -> None:
    truth = Truth(pivot_x_m=-4e-4, pivot_z_m=3e-4, jitter_s=0.0)
    c, seen = with_cycles(cycles, *rotation(truth, 2, step=2.0))
    tracker = ArrivalTracker(c)
    assert np.abs(apart(truth, seen, [tracker.update(o) for o in seen])).max() < 0.02


def test_noise_that_hides_the_group_delay_does_not_make_half_cycles() -> None:
    # 22 dB over noise: the group delay between lines f/16 apart scatters by a quarter of a cycle
    truth = Truth(pivot_x_m=2e-4, pivot_z_m=-2e-4, jitter_s=0.0, noise_v=2.8e-3)
    lost = kept = 0
    for seed in range(6):
        c, seen = rotation(truth, seed, step=1.0)
        tracker = ArrivalTracker(c)
        error = apart(truth, seen, [tracker.update(o) for o in seen])
        lost += int(np.sum(np.abs(error) > 0.25))
        kept += error.size
    assert kept > 400
    assert lost == 0


def test_without_neighbours_and_group_delay_nothing_is_said() -> None:
    truth = Truth(jitter_s=0.0)
    c, seen = rotation(truth, 0, step=10.0)
    tracker = ArrivalTracker(c)
    assert tracker.update(seen[0]).usable
    aside = next(o for o in seen if abs(o.commanded.theta) > 0.2)
    noisy = replace(aside, component_noise_v=np.full(16, abs(aside.components[0]) / 8))
    assert not tracker.update(noisy).usable


def test_a_move_along_the_beam_is_followed_over_many_periods() -> None:
    c = circumstances()
    _, seen = rotation(Truth(jitter_s=0.0, noise_v=1e-9), 0)
    tracker = ArrivalTracker(c)
    lines = np.concatenate([c.frequencies_hz, c.side_lines_hz])
    first = None
    for z in np.linspace(0.08, 0.16, 9):
        turns = np.exp(-2j * np.pi * lines * z / SPEED)
        o = replace(
            seen[0],
            commanded=replace(seen[0].commanded, z=float(z)),
            components=0.02 * turns[:16],
            side_components=0.02 * turns[16:],
        )
        found = tracker.update(o)
        first = found.time_s if first is None else first
        assert found.time_s - first == pytest.approx((z - 0.08) / SPEED, abs=1e-10)
