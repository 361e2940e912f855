"""Gate and lines of a burst."""

from typing import Any

import numpy as np
import pytest
from hypothesis import given
from hypothesis import strategies as st

from checks.comb import comb_lines, side_lines
from checks.errors import MeasurementError
from checks.gate import echo_free_s, plan_gate

PLAIN: dict[str, Any] = {
    "nearest_m": 0.12,
    "farthest_m": 0.12,
    "lateral_m": 0.006,
    "speed_m_s": 1482.0,
    "frequency_hz": 2.25e6,
    "cycles": 8,
    "reflector_distance_m": 0.1,
    "record_start_s": 77e-6,
    "interval_s": 4e-9,
    "samples": 5000,
}


@given(st.floats(0.05, 0.2), st.floats(0, 0.004), st.floats(0, 0.01), st.integers(1, 20), st.floats(0.5e6, 10e6))
def test_a_gate_holds_the_whole_burst_and_ends_before_the_echo(
    near: float, deep: float, lateral: float, cycles: int, hertz: float
) -> None:
    asked = PLAIN | {
        "nearest_m": near,
        "farthest_m": near + deep,
        "lateral_m": lateral,
        "cycles": cycles,
        "frequency_hz": hertz,
        "record_start_s": near / 1482.0 - 4e-6,
    }
    try:
        gate = plan_gate(**asked)
    except MeasurementError:
        return  # what is refused, and how, is told below
    start, stop = (asked["record_start_s"] + n * 4e-9 for n in (gate.start, gate.stop))
    assert start <= near / 1482.0
    assert stop >= np.hypot(near + deep, lateral) / 1482.0 + cycles / hertz - 4e-9
    assert stop <= (near + deep) / 1482.0 + echo_free_s(near + deep, 0.1, 1482.0) + 8e-9
    assert 0 <= gate.quiet_start < gate.quiet_stop <= gate.start < gate.stop <= 5000


@pytest.mark.parametrize(
    ("change", "words"),
    [
        ({"cycles": 200, "reflector_distance_m": 0.02}, "first echo is due"),
        ({"samples": 1200}, "more points or a lower sample rate"),
        ({"record_start_s": 80e-6}, "raise lead_us by"),
    ],
)
def test_what_does_not_fit_is_refused_with_the_cure(change: dict[str, Any], words: str) -> None:
    with pytest.raises(MeasurementError, match=words):
        plan_gate(**(PLAIN | change))


def test_lines_are_multiples_of_the_drive_up_to_what_is_wanted_and_sampled() -> None:
    assert comb_lines(2.25e6, 36e6, 250e6) == pytest.approx(2.25e6 * np.arange(1, 17))
    assert comb_lines(2.25e6, 36e6, 50e6).max() <= 0.45 * 50e6
    with pytest.raises(MeasurementError, match="a higher sample rate"):
        comb_lines(30e6, 40e6, 50e6)


@pytest.mark.parametrize("cycles", [1, 3, 8, 30])
def test_side_lines_lie_within_the_main_lobe_of_the_burst(cycles: int) -> None:
    # the spectrum of n cycles is sinc about the drive with nulls f/n away; a quarter of that keeps 90 %
    low, high = side_lines(5e6, cycles)
    assert (high + low) / 2 == 5e6
    assert np.sinc((high - 5e6) * cycles / 5e6) == pytest.approx(0.9003, abs=1e-4)
