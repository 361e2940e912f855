"""Sensitivity tables: units, interpolation, marks outside the range, loading, refusals."""

from __future__ import annotations

import numpy as np
import pytest

from checks.errors import MeasurementError
from checks.sensitivity import Loading, at, loaded, relative_from_db, sensitivity_of, volts_per_pascal

F = np.array([1e6, 2e6, 4e6])
FLAT = np.full(3, 5e-8)


def test_decibels_are_re_one_volt_per_micropascal() -> None:
    # common practice: 50 nV/Pa is -266.02 dB re 1 V/µPa
    assert volts_per_pascal(np.array([-266.0206])) == pytest.approx(5e-8, rel=1e-5)
    assert relative_from_db(np.array([1.0])) == pytest.approx(0.1151293, rel=1e-6)


def test_magnitude_runs_straight_in_decibels_and_phase_without_its_jumps() -> None:
    table = sensitivity_of(F, np.array([1e-8, 4e-8, 4e-8]), np.radians([170.0, -170.0, -150.0]))
    there = at(table, np.array([1.5e6]))
    assert np.abs(there.value[0]) == pytest.approx(2e-8)
    assert np.degrees(np.angle(there.value[0])) % 360 == pytest.approx(180.0)
    assert there.phase_known


def test_outside_the_table_is_marked() -> None:
    there = at(sensitivity_of(F, FLAT), np.array([0.5e6, 1e6, 3e6, 4e6, 4.1e6]))
    assert there.inside.tolist() == [False, True, True, True, False]
    assert not there.phase_known
    np.testing.assert_allclose(there.weights.sum(axis=1), 1.0)


def test_one_line_serves_as_a_table() -> None:
    there = at(sensitivity_of(F[:1], FLAT[:1]), np.array([1e6, 2e6]))
    assert np.abs(there.value) == pytest.approx(5e-8)
    assert there.inside.tolist() == [True, False]


def test_a_cable_divides_by_the_capacitances_and_a_resistance_turns_the_phase() -> None:
    table = sensitivity_of(F, FLAT, np.zeros(3))
    cable = loaded(table, Loading(element_f=20e-12, cable_f=60e-12, gain=10))
    assert cable.magnitude_v_per_pa == pytest.approx(5e-8 * 20 / 80 * 10)
    # at its corner 1/(2 pi R C) a high-pass passes 1/sqrt 2 and leads by 45 degrees (textbook circuit theory)
    resistance = 1 / (2 * np.pi * 1e6 * 80e-12)
    turned = loaded(table, Loading(20e-12, 60e-12, input_ohm=resistance))
    assert turned.phase_rad is not None
    assert turned.magnitude_v_per_pa[0] == pytest.approx(5e-8 / 4 / np.sqrt(2))
    assert np.degrees(turned.phase_rad[0]) == pytest.approx(45.0)


def test_impossible_tables_are_refused_in_one_line() -> None:
    for columns in ((F[::-1], FLAT), (F, -FLAT), (F, FLAT[:2]), (F, FLAT * np.nan), (F, FLAT, None, -0.1)):
        with pytest.raises(MeasurementError, match=r"^sensitivity table: [^\n]+$"):
            sensitivity_of(*columns)
    with pytest.raises(MeasurementError, match="common"):
        sensitivity_of(F, FLAT, common=1.5)
    with pytest.raises(MeasurementError, match="loading"):
        loaded(sensitivity_of(F, FLAT), Loading(element_f=0.0))
