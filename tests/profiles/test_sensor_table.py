"""A sensor's table with phase, uncertainty, either unit and loading; each wrong value is told in one line."""

from __future__ import annotations

from typing import Any

import pytest

from profiles.errors import ProfileError
from profiles.load import validate
from profiles.sensor import Sensor
from tests.profiles.tables import shipped

ROW = {"frequency_mhz": 1.0, "sensitivity_db": -266.0, "phase_deg": -5.0, "uncertainty_percent": 6.0}
SECOND = {**ROW, "frequency_mhz": 2.0}


def sensor(**changes: Any) -> Sensor:
    found = validate({**shipped("sensor", "needle-0p4"), **changes}, "sensor")
    assert isinstance(found, Sensor)
    return found


def test_decibels_phase_uncertainty_and_loading_are_read() -> None:
    s = sensor(sensitivity=[ROW, SECOND], loading={"element_pf": 20.0, "cable_pf": 60.0, "preamplifier_gain_db": 20.0})
    assert s.sensitivity[1].sensitivity_db == -266.0
    assert s.sensitivity[0].phase_deg == -5.0
    assert s.loading is not None
    assert s.loading.preamplifier_input_kohm is None


WRONG: list[tuple[dict[str, Any], str]] = [
    ({"sensitivity": [{"frequency_mhz": 1.0}]}, "give exactly one of sensitivity_nv_per_pa and sensitivity_db"),
    ({"sensitivity": [{**ROW, "sensitivity_nv_per_pa": 50.0}]}, "give exactly one of"),
    ({"sensitivity": [{**ROW, "sensitivity_db": 3.0}]}, "allowed: less than 0"),
    ({"sensitivity": [{**ROW, "uncertainty_percent": -1.0}]}, "allowed: at least 0"),
    ({"sensitivity": [{**ROW, "phase_deg": float("nan")}]}, "a finite number"),
    (
        {"sensitivity": [{"frequency_mhz": 1.0, "sensitivity_db": -266.0, "phase_uncertainty_deg": 1.0}]},
        "needs phase_deg",
    ),
    (
        {"sensitivity": [ROW, {"frequency_mhz": 2.0, "sensitivity_db": -266.0, "uncertainty_percent": 6.0}]},
        "phase_deg must be in every row or in none",
    ),
    ({"loading": {"cable_pf": 60.0}}, "element_pf: missing"),
    ({"loading": {"element_pf": 0.0}}, "allowed: more than 0"),
    ({"loading": {"element_pf": 20.0, "cable_pF": 60.0}}, "this quantity is given as cable_pf|did you mean cable_pf"),
]


@pytest.mark.parametrize(("changes", "told"), WRONG)
def test_a_wrong_value_is_told_in_one_line(changes: dict[str, Any], told: str) -> None:
    with pytest.raises(ProfileError, match=told) as caught:
        sensor(**changes)
    assert len(caught.value.problems) == 1
