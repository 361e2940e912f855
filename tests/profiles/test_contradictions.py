"""Values that are right by themselves and contradict each other: each is told, with the key to change."""

from __future__ import annotations

from typing import Any

import pytest

from profiles.errors import ProfileError
from profiles.load import Kind, validate
from tests.profiles.tables import Place, changed, shipped

CASES: list[tuple[Kind, str, dict[Place, Any], list[str]]] = [
    # scans
    ("scan", "demo-rotation", {("rotation", "angles_deg"): [-10, 0, 10]}, [
        "rotation.span_deg: contradicts angles_deg; give one",
        "rotation.step_deg: contradicts angles_deg; give one",
    ]),
    ("scan", "demo-rotation", {("rotation", "highest_mhz"): 20}, [
        "rotation: give exactly one of step_deg and highest_mhz",
    ]),
    ("scan", "demo-rotation", {("rotation", "step_deg"): 60, ("rotation", "planes_deg"): [0, 0]}, [
        "rotation.step_deg: 60.0 is above half the span, 45.0",
        "rotation.planes_deg: a plane is given twice",
    ]),
    ("scan", "demo-rotation", {("rotation", "order"): "as-listed"}, ["rotation.order: as-listed needs angles_deg"]),
    ("scan", "demo-rotation", {("rotation",): None}, ["the file: give exactly one of [rotation] and [raster]"]),
    ("scan", "demo-raster", {("rotation",): {"span_deg": 20, "step_deg": 1}}, [
        "the file: give exactly one of [rotation] and [raster]",
    ]),
    ("scan", "demo-rotation", {("highest_mhz",): 125}, [
        "highest_mhz: 125.0 must be below half the sample rate, 125.0",
    ]),
    ("scan", "demo-raster", {("raster", "directions", 1, "axis"): "x"}, [
        "raster.directions: an axis is given twice: x, x",
    ]),
    ("scan", "demo-raster", {("raster", "directions", 0, "step_mm"): 3}, [
        "raster.directions.0.step_mm: 3.0 is above half the span, 2.0",
    ]),
    # sources and sensors
    ("source", "focused-3", {("drive_v",): 25, ("repetition_hz",): 200_000, ("focal_length_mm",): 9}, [
        "the file: drive_v 25.0 is above max_drive_v 20.0",
        "the file: repetition_hz 200000.0: the burst lasts 4 us, so at most 1.25e+05 Hz is allowed",
        "the file: focal_length_mm 9.0 is below radius_mm 10.0",
    ]),
    ("sensor", "needle-0p4", {("sensitivity", 1, "frequency_mhz"): 50}, [
        "sensitivity: frequency_mhz must ascend from row to row",
    ]),
    # benches
    ("bench", "demo-tank", {("axes", "x", "low_mm"): 40, ("axes", "theta", "high_deg"): -100}, [
        "axes.x: low_mm 40.0 must be below high_mm 30.0",
        "axes.theta: low_deg -95.0 must be below high_deg -100.0",
    ]),
    ("bench", "demo-tank", {("instruments", "stage"): None, ("instruments", "generator"): None}, [
        "instruments.stage: missing",
        "instruments.generator: missing",
    ]),
    ("bench", "demo-tank", {("instruments", "generator", "address"): "tcp://127.0.0.1:5025"}, [
        "instruments: address tcp://127.0.0.1:5025 is given twice",
    ]),
    ("bench", "demo-tank", {("instruments", "generator", "address"): "tcp://127.0.0.1:99999"}, [
        "instruments.generator.address: 'tcp://127.0.0.1:99999' has no such port; allowed: up to 65535",
    ]),
    ("bench", "demo-tank", {("keep_out", 0, "low_mm"): [-25, 30, 20]}, [
        "keep_out.0: low_mm must be below high_mm along y, z",
    ]),
    # instruments
    ("instrument", "scope-preamble-16", {("commands", "arm"): None, ("commands", "shoot"): "X", ("scope",): None}, [
        "commands.arm: missing",
        "scope: missing, an oscilloscope needs it",
    ]),
    ("instrument", "generator-burst", {("commands", "frequency"): "FREQ {volts}", ("family",): "burst"}, [
        "commands.frequency: {volts} unknown; allowed: hertz",
    ]),
    ("instrument", "generator-burst", {("family",): "curve"}, [
        "family: 'curve' is not one for role generator; allowed: burst",
    ]),
    ("instrument", "stage-iso", {("axis_words",): None}, ["axis_words: a stage needs it, nothing else may have it"]),
]  # fmt: skip


@pytest.mark.parametrize(("kind", "name", "changes", "expected"), CASES)
def test_contradictions_are_told_with_their_keys(
    kind: Kind, name: str, changes: dict[Place, Any], expected: list[str]
) -> None:
    with pytest.raises(ProfileError) as caught:
        validate(changed(shipped(kind, name), changes), kind)
    assert [line for line in expected if line not in caught.value.problems] == []


@pytest.mark.parametrize(("kind", "name", "changes", "expected"), CASES)
def test_an_unknown_key_does_not_hide_a_contradiction(
    kind: Kind, name: str, changes: dict[Place, Any], expected: list[str]
) -> None:
    with pytest.raises(ProfileError) as caught:
        validate(changed(shipped(kind, name), changes) | {"colour": "red"}, kind)
    lines = caught.value.problems
    assert [line for line in expected if line not in lines] == []
    assert any(line.startswith("colour: unknown key; ") for line in lines)
