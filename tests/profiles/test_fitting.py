"""Whether profiles fit together, and whether what they refer to is there."""

from __future__ import annotations

from pathlib import Path
from typing import Any

import pytest
import tomli_w

from profiles.bench import Bench
from profiles.errors import ProfileError
from profiles.fitting import misfits
from profiles.load import load_bench, load_instrument, load_scan, load_sensor, load_source, validate
from profiles.references import instruments_of, unmet, unmet_on
from profiles.scan import Scan
from tests.profiles.tables import Place, changed, shipped


def scan_with(changes: dict[Place, Any], name: str = "demo-rotation") -> Scan:
    scan = validate(changed(shipped("scan", name), changes), "scan")
    assert isinstance(scan, Scan)
    return scan


def bench_with(changes: dict[Place, Any], name: str = "demo-tank") -> Bench:
    bench = validate(changed(shipped("bench", name), changes), "bench")
    assert isinstance(bench, Bench)
    return bench


def told(scan: Scan, bench: Bench | None = None) -> list[str]:
    return misfits(
        scan,
        bench or load_bench("demo-tank"),
        load_sensor(scan.sensor),
        load_source(scan.source),
        load_instrument("scope-preamble-16"),
    )


def test_a_scan_that_fits_its_bench_is_not_found_fault_with() -> None:
    assert told(load_scan("demo-rotation")) == []
    assert told(load_scan("demo-raster"), load_bench("focus-tank")) == []


@pytest.mark.parametrize(
    ("changes", "expected"),
    [
        ({("highest_mhz",): 50}, [
            "scan demo-rotation: highest_mhz: 50 given; sensor needle-0p4 reaches 40",
            "scan demo-rotation: highest_mhz: 50 given; source plane-2p25 offers up to 36",
        ]),
        # 12 cycles at 2.25 MHz last 5.33 us; with 4 us of lead 9.33 us: 2334 samples at 250 MHz
        ({("capture", "points"): 2333}, [
            "scan demo-rotation: capture: the record lasts 9.33 us; lead and burst need 9.33 us: "
            "more points or a lower sample_rate_mhz",
        ]),
        ({("capture", "points"): 2334}, []),
        ({("capture", "points"): 1334, ("capture", "start_us"): 80}, []),
        ({("capture", "sample_rate_mhz"): 240}, [
            "scan demo-rotation: capture.sample_rate_mhz: 240 given; scope-preamble-16 allows "
            "25, 50, 62.5, 100, 125, 200, 250, 500",
        ]),
        ({("capture", "points"): 2_000_000, ("capture", "full_scale_v"): 50}, [
            "scan demo-rotation: capture.points: 2e+06 given; scope-preamble-16 allows at most 1e+06",
            "scan demo-rotation: capture.full_scale_v: 50 given; scope-preamble-16 allows at most 40",
        ]),
        ({("rotation", "span_deg"): 180}, []),
        ({("rotation", "planes_deg"): [-180, 0, 180]}, []),
    ],
)  # fmt: skip
def test_what_sensor_source_and_oscilloscope_do_not_offer_is_told(
    changes: dict[Place, Any], expected: list[str]
) -> None:
    assert told(scan_with(changes)) == expected


def test_angles_beyond_the_travel_are_told_on_the_side_where_they_are() -> None:
    bench = bench_with({("axes", "theta", "low_deg"): -30, ("axes", "phi", "high_deg"): 45})
    scan = scan_with({("rotation", "span_deg"): 70, ("rotation", "planes_deg"): [0, 90]})
    assert told(scan, bench) == [
        "scan demo-rotation: rotation reaches -35 deg; bench demo-tank allows theta from -30 to 95 deg",
        "scan demo-rotation: rotation.planes_deg: 90 deg; bench demo-tank allows phi from -180 to 45 deg",
    ]


def test_axes_that_the_bench_has_not_are_told() -> None:
    bench = bench_with({("axes", "theta"): None, ("axes", "phi"): None, ("axes", "y"): None})
    assert told(scan_with({("rotation", "planes_deg"): [0, 90]}), bench) == [
        "scan demo-rotation: needs axis theta; bench demo-tank has not",
        "scan demo-rotation: needs axis phi; bench demo-tank has not",
    ]
    assert told(load_scan("demo-raster"), bench) == ["scan demo-raster: needs axis y; bench demo-tank has not"]


def test_a_single_plane_needs_no_roll() -> None:
    assert told(load_scan("demo-rotation"), bench_with({("axes", "phi"): None})) == []


def test_all_instruments_of_a_bench_are_loaded_by_role() -> None:
    found = instruments_of(load_bench("curve-tank"))
    assert {role: instrument.family for role, instrument in found.items()} == {
        "oscilloscope": "curve",
        "generator": "burst",
        "stage": "axis-prefix",
        "thermometer": "query",
    }


def test_every_instrument_that_is_missing_or_of_another_role_is_told() -> None:
    bench = bench_with(
        {("instruments", "oscilloscope", "profile"): "stage-iso", ("instruments", "stage", "profile"): "nothing"}
    )
    with pytest.raises(ProfileError) as caught:
        instruments_of(bench)
    first, second = caught.value.problems
    assert first == (
        "bench demo-tank: instruments.oscilloscope: stage-iso is a profile for the role stage; allowed: oscilloscope"
    )
    assert second.startswith("bench demo-tank: instruments.stage: no instrument is called 'nothing'; known: ")
    assert unmet(bench) == [first, second]


def test_an_axis_that_the_stage_has_no_word_for_is_told(own_folder: Path) -> None:
    text = changed(shipped("instrument", "stage-iso"), {("axis_words",): {"x": "X", "y": "Y", "z": "Z", "theta": "B"}})
    (own_folder / "instruments").mkdir()
    (own_folder / "instruments" / "stage-iso.toml").write_text(tomli_w.dumps(text), "utf-8")
    assert unmet(load_bench("demo-tank")) == [
        "bench demo-tank: axes.phi: stage-iso has no such axis; allowed: x, y, z, theta"
    ]
    assert unmet(load_bench("focus-tank")) == []


def test_a_scan_whose_sensor_and_source_are_unknown_is_told_both() -> None:
    lines = unmet(scan_with({("sensor",): "needle-9", ("source",): "plane-9"}))
    assert [line.split(";")[0] for line in lines] == [
        "scan demo-rotation: sensor: no sensor is called 'needle-9'",
        "scan demo-rotation: source: no source is called 'plane-9'",
    ]


def test_a_scan_can_be_tried_on_a_bench() -> None:
    assert unmet_on(load_scan("demo-rotation"), "curve-tank") == []
    assert unmet_on(load_scan("two-planes"), "focus-tank") == [
        "scan two-planes: needs axis phi; bench focus-tank has not"
    ]
    assert unmet_on(load_sensor("needle-0p4"), "curve-tank") == []
