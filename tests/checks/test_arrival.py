"""Arrival from the phase of the drive frequency: cycles, nulls, weak points."""

from dataclasses import replace

import numpy as np
import pytest

from checks.arrival import ArrivalTracker
from tests.checks.synthetic import BEND, DISTANCE_M, DRIVE_HZ, SPEED, STRETCH, Truth, face_s, rotation


@pytest.mark.parametrize(("x_mm", "z_mm"), [(0.0, 0.0), (0.3, -0.4), (-1.0, 1.0), (2.0, 0.0)])
def test_arrivals_follow_the_centre_over_several_cycles(x_mm: float, z_mm: float) -> None:
    # 2 mm swing over ±40° is 1.73 us, four cycles of 2.25 MHz
    truth = Truth(pivot_x_m=x_mm * 1e-3, pivot_z_m=z_mm * 1e-3, jitter_s=0.0)
    c, seen = rotation(truth, 1)
    tracker = ArrivalTracker(c)
    theta = np.array([o.commanded.theta for o in seen])
    found = np.array([tracker.update(o).time_s for o in seen])
    aside = truth.pivot_x_m * (np.cos(theta) - 1) + truth.pivot_z_m * np.sin(theta)
    along = STRETCH * (truth.pivot_z_m * (np.cos(theta) - 1) - truth.pivot_x_m * np.sin(theta)) + BEND * aside**2 / 2
    along = along + SPEED * face_s(theta - BEND * aside, truth.radius_m, truth.edge)
    assert np.abs(found - found[0] - (along - along[0]) / SPEED).max() < 2e-10
    cycles = (found[0] - (DISTANCE_M + along[0]) / SPEED) * DRIVE_HZ  # the constant of a scan is whole cycles
    assert cycles == pytest.approx(round(cycles), abs=1e-3)


def test_past_a_null_the_sign_is_turned_and_the_arrival_goes_on() -> None:
    # 0.8 mm radius at 2.25 MHz: ka = 7.6, first null at 30°
    truth = Truth(radius_m=0.8e-3, jitter_s=0.0)
    c, seen = rotation(truth, 2)
    tracker = ArrivalTracker(c)
    arrivals = [tracker.update(o) for o in seen]
    beyond = [a for a, o in zip(arrivals, seen, strict=True) if abs(o.commanded.theta) > np.radians(33)]
    assert sum(a.usable for a in beyond) > 20
    usable = np.array([a.usable for a in arrivals])
    theta = np.array([o.commanded.theta for o in seen])
    late = face_s(theta, truth.radius_m, truth.edge)  # what a bent wave does, much near the null
    times = np.array([a.time_s for a in arrivals]) - late
    assert np.ptp(times[usable]) < 5e-10
    near = [a.usable for a, o in zip(arrivals, seen, strict=True) if abs(abs(o.commanded.theta) - 0.5263) < 0.007]
    assert near
    assert not any(near)  # f sin(theta) within 1 % of the null: the phase is not believed


def test_stated_uncertainty_is_the_scatter_of_the_phase() -> None:
    truth = Truth(jitter_s=0.0, noise_v=1e-4, flutter=0.0)
    pulls = []
    for seed in range(6):
        c, seen = rotation(truth, seed)
        tracker = ArrivalTracker(c)
        for o in seen:
            a = tracker.update(o)
            late = (a.time_s - DISTANCE_M / SPEED) * DRIVE_HZ
            pulls.append((late - round(late)) / DRIVE_HZ / a.standard_uncertainty_s)
    assert len(pulls) > 1000
    assert np.sqrt(np.mean(np.square(pulls))) == pytest.approx(1.0, abs=0.08)


def test_without_signal_there_is_no_arrival() -> None:
    c, seen = rotation(Truth(), 3)
    tracker = ArrivalTracker(c)
    silent = replace(seen[0], components=np.zeros(16, complex))
    assert not tracker.update(silent).usable
    buried = replace(seen[0], component_noise_v=np.full(16, abs(seen[0].components[0])))
    assert not tracker.update(buried).usable
    assert tracker.update(seen[0]).usable
