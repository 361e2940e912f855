"""Readings of a thermometer with few digits."""

import numpy as np
import pytest
from hypothesis import given
from hypothesis import strategies as st

from checks.warmth import smoothed

PLACE = np.linspace(0, 1, 60)


@given(st.floats(10, 30), st.floats(-0.03, 0.03), st.floats(-0.005, 0.005))
def test_a_slow_change_is_found_within_the_last_digit(start: float, slope: float, bend: float) -> None:
    true = start + slope * PLACE + bend * PLACE**2
    found = smoothed(np.round(true, 3))
    assert np.abs(found - true).max() < 1.1e-3


def test_a_straight_drift_comes_out_straighter_than_its_steps() -> None:
    true = 20.0 + 0.0042 * PLACE
    read = np.round(true, 3)
    assert np.std(smoothed(read) - true) < 0.5 * np.std(read - true)


def test_a_sudden_change_is_kept_as_it_was_read() -> None:
    read = np.where(PLACE < 0.5, 20.0, 20.5)
    assert smoothed(read) == pytest.approx(read, abs=0.0)


def test_one_reading_stands_for_itself() -> None:
    assert smoothed(np.full(3, 21.3)) == pytest.approx([21.3] * 3)
