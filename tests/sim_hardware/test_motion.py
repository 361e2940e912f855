from __future__ import annotations

from math import exp, inf

import numpy as np
import pytest
from hypothesis import given
from hypothesis import strategies as st

from profiles.bench import AxisTable
from profiles.model import Axis
from sim_hardware.clock import Timeline
from sim_hardware.motion import AxisLimits, Motion, axis_limits
from sim_hardware.trapezoid import Brake, Law, Trapezoid
from sim_hardware.truth import LostSteps, MechanicsTruth
from tests.sim_hardware.talking import HandClock

LIMITS: dict[Axis, AxisLimits] = {
    "x": AxisLimits(-0.05, 0.05, 0.02, 0.1),
    "z": AxisLimits(0.02, 0.3, 0.02, 0.1),
    "theta": AxisLimits(-1.5, 1.5, 0.5, 2.0),
}
RATES = st.floats(1e-3, 1e3)


def homed(mechanics: MechanicsTruth | None = None, seed: int = 0) -> tuple[HandClock, Motion]:
    clock = HandClock()
    motion = Motion(LIMITS, mechanics or MechanicsTruth(), Timeline(1.0, clock), seed)
    motion.home()
    let_arrive(clock, motion)
    return clock, motion


def let_arrive(clock: HandClock, motion: Motion, later_s: float = 0.0) -> None:
    clock.seconds = max(clock.seconds, motion.end_s()) + later_s
    motion._timeline.run_due()


@given(RATES, RATES)
def test_area_under_the_speed_is_the_distance(speed: float, acceleration: float) -> None:
    law = Trapezoid.plan(speed, acceleration)
    check_area(law)
    assert law.travelled(-1.0) == 0.0
    assert law.travelled(law.duration_s) == 1.0
    assert law.travelled(inf) == 1.0


@given(RATES, RATES)
def test_braking_covers_v_squared_over_twice_the_deceleration(speed: float, acceleration: float) -> None:
    law = Brake(speed, acceleration)
    check_area(law)
    assert law.travelled(law.duration_s) == pytest.approx(speed**2 / (2 * acceleration))


def check_area(law: Law) -> None:
    """Trapezoidal rule on 20 001 points against the distance, at every point."""
    t = np.linspace(0.0, law.duration_s, 20_001)
    speed = np.array([law.speed(v) for v in t])
    steps = (speed[1:] + speed[:-1]) / 2 * np.diff(t)
    area = np.concatenate(([0.0], np.cumsum(steps)))
    places = np.array([law.travelled(v) for v in t])
    np.testing.assert_allclose(area, places, atol=2e-4 * places[-1])
    assert np.all(np.diff(places) >= -1e-12 * places[-1])
    assert np.abs(np.diff(speed)).max() <= law.acceleration * (t[1] - t[0]) * (1 + 1e-6)


def test_the_duration_of_a_long_move_is_distance_over_speed_plus_one_ramp() -> None:
    # kinematics: s/v + v/a
    clock, motion = homed()
    began = clock.seconds
    motion.go_together({"x": 0.04}, None)
    assert motion.end_s() - began == pytest.approx(0.04 / 0.02 + 0.02 / 0.1)


def test_coordinated_axes_stay_on_a_straight_line_within_their_own_speeds() -> None:
    clock, motion = homed()
    start = motion.carriage(clock.seconds)
    motion.go_together({"x": 0.03, "theta": 1.2}, None)
    began, ended = clock.seconds, motion.end_s()
    t = np.linspace(began, ended, 500)
    x = np.array([motion.carriage(v).x for v in t]) - start.x
    theta = np.array([motion.carriage(v).theta for v in t]) - start.theta
    np.testing.assert_allclose(theta, x * 1.2 / 0.03, atol=1e-12)
    assert np.diff(x).max() / np.diff(t)[0] <= 0.02 * (1 + 1e-6)
    assert np.diff(theta).max() / np.diff(t)[0] <= 0.5 * (1 + 1e-6)


def test_feed_is_the_speed_along_the_linear_path() -> None:
    clock, motion = homed()
    motion.go_together({"x": 0.03, "z": motion.target("z") + 0.04}, 0.005)
    middle = (clock.seconds + motion.end_s()) / 2
    early, late = motion.carriage(middle), motion.carriage(middle + 0.1)
    assert np.hypot(late.x - early.x, late.z - early.z) / 0.1 == pytest.approx(0.005)


def test_queued_moves_follow_each_other() -> None:
    clock, motion = homed()
    motion.go_together({"x": 0.01}, None)
    first_end = motion.end_s()
    motion.go_together({"x": -0.01}, None)
    assert motion.carriage(first_end).x == pytest.approx(0.01)
    assert motion.carriage(motion.end_s()).x == pytest.approx(-0.01)
    assert motion.moving()
    let_arrive(clock, motion)
    assert not motion.moving()


def test_independent_axes_arrive_in_their_own_times() -> None:
    _, motion = homed()
    motion.go_each({"x": 0.001, "theta": 1.0}, LIMITS)
    assert motion.end_s(("x",)) < motion.end_s(("theta",))


def test_stop_brakes_and_forgets_what_was_queued() -> None:
    clock, motion = homed()
    motion.go_together({"x": 0.04}, None)
    motion.go_together({"x": -0.04}, None)
    clock.seconds += 1.0
    before = motion.carriage(clock.seconds).x
    motion.stop()
    let_arrive(clock, motion)
    # from 0.02 m/s at 0.1 m/s^2: v^2 / 2a
    assert motion.carriage(clock.seconds).x - before == pytest.approx(0.02**2 / 0.2, rel=1e-6)
    assert motion.target("x") == pytest.approx(motion.carriage(clock.seconds).x)


def test_a_target_beyond_travel_or_an_axis_that_is_not_there_is_not_allowed() -> None:
    _, motion = homed()
    assert motion.may_go({"x": 0.05})
    assert not motion.may_go({"x": 0.0501})
    assert not motion.may_go({"y": 0.0})


def test_before_homing_the_count_is_not_the_truth_and_after_it_is() -> None:
    clock = HandClock()
    motion = Motion(LIMITS, MechanicsTruth(), Timeline(1.0, clock))
    assert motion.carriage(0.0).x != pytest.approx(motion.reported()["x"], abs=1e-3)
    motion.home()
    assert motion.homed == set()
    let_arrive(clock, motion)
    assert motion.homed == {"x", "z", "theta"}
    assert motion.reported() == pytest.approx({"x": 0.0, "z": 0.02, "theta": 0.0})
    carriage = motion.carriage(clock.seconds)
    assert (carriage.x, carriage.z, carriage.theta) == pytest.approx((0.0, 0.02, 0.0))


def test_stopping_while_homing_leaves_it_not_homed() -> None:
    clock = HandClock()
    motion = Motion(LIMITS, MechanicsTruth(), Timeline(1.0, clock))
    motion.home()
    clock.seconds = 0.1
    motion.stop()
    let_arrive(clock, motion, 1000.0)
    assert motion.homed == set()


def test_backlash_shows_when_the_direction_changes_and_not_when_approached_upwards() -> None:
    clock, motion = homed(MechanicsTruth(backlash_mm=0.03))
    errors = []
    for target in (0.01, 0.02, 0.01, 0.005, 0.00501, 0.02):
        motion.go_together({"x": target}, None)
        let_arrive(clock, motion)
        errors.append(motion.carriage(clock.seconds).x - target)
        assert motion.reported()["x"] == pytest.approx(target)
    # the fifth move of 10 um upwards takes up a part of the 30 um only
    assert errors == pytest.approx([0, 0, 30e-6, 30e-6, 20e-6, 0], abs=1e-9)


@given(st.lists(st.floats(-0.05, 0.05), min_size=1, max_size=8))
def test_backlash_never_exceeds_its_size(targets: list[float]) -> None:
    clock, motion = homed(MechanicsTruth(backlash_mm=0.03))
    for target in targets:
        motion.go_together({"x": target}, None)
        for t in np.linspace(clock.seconds, motion.end_s(), 7):
            clock.seconds = float(t)
            error = motion.carriage(clock.seconds).x - motion.reported()["x"]
            assert -1e-12 <= error <= 30e-6 + 1e-12


def test_lost_steps_shift_the_truth_from_the_given_move_on_until_homed() -> None:
    lost = LostSteps(axis="x", onset_move=2, size_mm=0.1)
    clock, motion = homed(MechanicsTruth(lost_steps=(lost,)))
    errors = []
    for target in (0.01, 0.02, 0.0):
        motion.go_together({"x": target}, None)
        let_arrive(clock, motion)
        assert motion.reported()["x"] == pytest.approx(target)
        errors.append(motion.carriage(clock.seconds).x - target)
    assert errors == pytest.approx([0.0, 1e-4, 1e-4], abs=1e-9)
    motion.home()
    let_arrive(clock, motion)
    assert motion.carriage(clock.seconds).x == pytest.approx(0.0, abs=1e-9)


def test_after_arrival_it_rings_and_comes_to_rest() -> None:
    clock, motion = homed(MechanicsTruth(settle_time_ms=20.0, settle_amplitude_um=50.0))
    motion.go_together({"x": 0.01}, None)
    end = motion.end_s()
    assert motion.carriage(end).x - 0.01 == pytest.approx(50e-6)
    for periods in (1, 2, 3):  # it rings once per time constant
        assert motion.carriage(end + 0.02 * periods).x - 0.01 == pytest.approx(50e-6 * exp(-periods))
    assert not motion.still_between(end + 0.02, end + 0.03)
    assert motion.still_between(end + 0.2, end + 0.3)
    clock.seconds = end + 0.02
    assert motion.reported()["x"] - 0.01 == pytest.approx(50e-6 * exp(-1))


def test_at_once_a_move_takes_as_long_as_it_would_have_with_its_settling() -> None:
    timeline = Timeline(None)
    motion = Motion(LIMITS, MechanicsTruth(settle_time_ms=20.0, settle_amplitude_um=50.0), timeline)
    motion.home()
    timeline.run_due()
    began = timeline.now()
    motion.go_together({"x": 0.04}, None)
    timeline.run_due()
    assert timeline.now() - began > 0.04 / 0.02 + 0.02 / 0.1
    assert motion.carriage(timeline.now()).x == pytest.approx(0.04, abs=1e-7)


def test_the_readback_scatters_as_stated_and_repeats_for_a_seed() -> None:
    def readings(seed: int) -> list[float]:
        _, motion = homed(MechanicsTruth(readback_sigma_um=2.0), seed)
        return [motion.reported()["x"] for _ in range(400)]

    values = readings(3)
    # of 400 normal values the standard deviation is known to 3.5 %
    assert np.std(values) == pytest.approx(2e-6, rel=0.2)
    assert values == readings(3)
    assert values != readings(4)


def test_limits_come_from_the_bench_profile_in_si() -> None:
    table = AxisTable.model_validate(
        {
            "y": {"low_mm": -1.0, "high_mm": 2.0, "speed_mm_per_s": 5.0, "acceleration_mm_per_s2": 50.0},
            "phi": {"low_deg": -180.0, "high_deg": 180.0, "speed_deg_per_s": 90.0},
        }
    )
    limits = axis_limits(table)
    assert set(limits) == {"y", "phi"}
    assert limits["y"] == AxisLimits(-1e-3, 2e-3, 5e-3, 0.05)
    assert limits["phi"].high == pytest.approx(np.pi)
    assert limits["phi"].speed == pytest.approx(np.pi / 2)
