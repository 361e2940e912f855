"""The words in which a mistake is told."""

from __future__ import annotations

from typing import Any

import pytest

from profiles.errors import ProfileError
from profiles.load import validate
from tests.profiles.tables import Place, changed, shipped


def told(name: str, changes: dict[Place, Any]) -> str:
    kind: Any = "bench" if name.endswith("tank") else "scan"
    with pytest.raises(ProfileError) as caught:
        validate(changed(shipped(kind, name), changes), kind, "my.toml")
    return str(caught.value)


@pytest.mark.parametrize(
    ("name", "wrong", "right"),
    [
        ("demo-rotation", ("rotation", "step_rad"), "step_deg"),
        ("demo-rotation", ("rotation", "span"), "span_deg"),
        ("demo-rotation", ("capture", "lead_s"), "lead_us"),
        ("demo-rotation", ("capture", "sample_rate_hz"), "sample_rate_mhz"),
        ("demo-rotation", ("position", "z_m"), "z_mm"),
        ("demo-tank", ("axes", "x", "speed_m_per_s"), "speed_mm_per_s"),
        ("demo-tank", ("axes", "theta", "acceleration_rad_per_s2"), "acceleration_deg_per_s2"),
    ],
)
def test_a_key_with_another_unit_names_the_key_that_has_the_right_one(name: str, wrong: Place, right: str) -> None:
    key = ".".join(map(str, wrong))
    assert f"my.toml: {key}: unknown key; this quantity is given as {right}" in told(name, {wrong: 1}).splitlines()


def test_a_misspelt_key_names_its_neighbour_and_all_that_are_allowed() -> None:
    assert "capture.avrages: unknown key; did you mean averages? allowed: averages, dwell_ms, " in told(
        "demo-rotation", {("capture", "avrages"): 4}
    )


def test_a_list_with_a_wrong_entry_is_not_called_too_short() -> None:
    assert told("line-x", {("raster", "directions", 0, "axis"): "q"}) == (
        "my.toml: raster.directions.0.axis: 'q' given; allowed: 'x', 'y' or 'z'"
    )


def test_a_list_that_is_too_short_is() -> None:
    assert told("line-x", {("raster", "directions"): []}) == (
        "my.toml: raster.directions: [] given; allowed: a list of at least this many: 1"
    )


def test_a_role_that_does_not_exist_is_told_with_those_that_do() -> None:
    assert "my.toml: instruments.scope: 'scope' given; allowed: 'oscilloscope', 'generator', 'stage' or " in told(
        "demo-tank", {("instruments", "scope"): {"profile": "scope-curve-8", "address": "tcp://localhost:1"}}
    )


@pytest.mark.parametrize(
    ("value", "allowed"),
    [
        ("5000", "a whole number"),
        (5000.5, "a whole number"),
        (True, "a whole number"),
        ([1], "a whole number"),
        (63, "at least 64"),
        (10_000_001, "at most 10000000"),
    ],
)
def test_a_wrong_value_is_shown_with_what_is_allowed(value: object, allowed: str) -> None:
    assert told("demo-rotation", {("capture", "points"): value}) == (
        f"my.toml: capture.points: {value!r} given; allowed: {allowed}"
    )


def test_a_long_value_is_shortened() -> None:
    line = told("demo-rotation", {("capture",): "x" * 10_000})
    assert line.endswith(" given; allowed: a table")
    assert len(line) < 150


def test_no_word_of_the_library_that_finds_the_problems_is_seen() -> None:
    text = told("demo-rotation", {("capture",): 3, ("position", "z_mm"): "a", ("rotation", "order"): 1, ("name",): ""})
    assert len(text.splitlines()) == 4
    for word in ("pydantic", "input_value", "Value error", "validation", "should", "\\"):
        assert word not in text
