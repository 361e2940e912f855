import math
from typing import Any

import numpy as np
import pytest
from hypothesis import given
from hypothesis import strategies as st

from acquire.angles import angles, one_db_step, resolved_hz, step_for
from acquire.order import drift_inflation, ordered
from acquire.plan import Plan, make_plan
from acquire.pose import Pivot
from acquire.travel import PlanRefused, check_travel
from profiles.bench import Bench
from profiles.scan import Rotation, Scan

HEAD: dict[str, Any] = {
    "format_version": 1,
    "kind": "scan",
    "name": "a-scan",
    "sensor": "s",
    "source": "t",
    "position": {"x_mm": 1.0, "z_mm": 100.0},
    "capture": {"sample_rate_mhz": 100, "points": 1000},
}


def plan(**tables: Any) -> Plan:
    return make_plan(Scan.model_validate(HEAD | tables), radius_m=0.5e-3, speed_m_s=1482.4)


def bench(**tables: Any) -> Bench:
    attached = {
        role: {"profile": "any", "address": f"tcp://127.0.0.1:{port}"}
        for port, role in enumerate(("oscilloscope", "generator", "stage"), 5000)
    }
    axes = {
        "x": {"low_mm": -5, "high_mm": 5, "speed_mm_per_s": 10},
        "z": {"low_mm": 50, "high_mm": 150, "speed_mm_per_s": 10},
        "theta": {"low_deg": -60, "high_deg": 60, "speed_deg_per_s": 10},
    }
    head = {"format_version": 1, "kind": "bench", "name": "a-bench", "geometry": {"reflector_distance_mm": 90}}
    return Bench.model_validate(head | {"instruments": attached, "axes": axes} | tables)


def test_a_span_with_a_step_is_symmetric_and_holds_zero() -> None:
    theta = np.degrees(angles(Rotation(span_deg=80, step_deg=3), 1e-3, 1500))
    assert theta == pytest.approx(np.arange(-39, 40, 3))


@pytest.mark.parametrize("order", ["one-way", "interleaved", "out-and-back", "as-listed"])
@given(count=st.integers(3, 200))
def test_every_order_visits_each_angle_once(order: Any, count: int) -> None:
    assert sorted(ordered(count, order)) == list(range(count))


# The Cramér-Rao figures for 41 angles over +-40 degrees and 1 ns are 0.5900 um without and 25.904 um with a free
# linear drift, swept one way: worked out independently from the same model; their ratio is the inflation.
def test_one_way_a_drift_hides_a_lateral_offset_and_by_default_it_does_not() -> None:
    theta = np.radians(np.linspace(-40, 40, 41))
    assert drift_inflation(theta[ordered(41, "one-way")]) == pytest.approx(25.904 / 0.5900, rel=2e-3)
    assert drift_inflation(theta[ordered(41, "interleaved")]) < 1.05
    assert drift_inflation(theta[ordered(41, "out-and-back")]) < 1.6


def test_the_default_order_costs_at_most_half_again_the_motion_of_one_sweep() -> None:
    theta = np.radians(np.linspace(-40, 40, 41))

    def motion(order: Any) -> float:
        return float(np.abs(np.diff(np.concatenate([[0.0], theta[ordered(41, order)], [0.0]]))).sum())

    assert motion("interleaved") <= 1.5 * motion("one-way")


# Steps at which a rigid disc changes by 1 dB at its -10 dB point, a = 0.1 mm, c = 1482.4 m/s: 1.86, 0.75 and
# 0.36 degrees at 10, 20 and 40 MHz (worked out independently from 2 J1(x)/x).
@pytest.mark.parametrize(("mhz", "deg"), [(10, 1.86), (20, 0.75), (40, 0.36)])
def test_one_decibel_step_against_independent_values(mhz: float, deg: float) -> None:
    assert math.degrees(one_db_step(mhz * 1e6, 0.1e-3, 1482.4, math.radians(80))) == pytest.approx(deg, rel=0.02)


@given(mhz=st.floats(0.5, 40), radius_um=st.floats(20, 1000), half_deg=st.floats(5, 80))
def test_a_chosen_step_obeys_the_sampling_theorem(mhz: float, radius_um: float, half_deg: float) -> None:
    step = step_for(mhz * 1e6, radius_um * 1e-6, 1482.4, math.radians(half_deg))
    floored = step <= math.radians(0.0501)
    assert floored or resolved_hz(step, radius_um * 1e-6, 1482.4) >= mhz * 1e6 * (1 - 1e-9)


def test_revisits_open_close_and_divide_a_rotation() -> None:
    points = plan(rotation={"span_deg": 40, "step_deg": 2}, revisit_every=5).points
    reference = [p.index for p in points if p.reference]
    assert points[0].reference
    assert points[-1].reference
    assert max(np.diff(reference)) <= 6
    assert [p.index for p in points] == list(range(len(points)))
    assert {p.pose[3] for p in points if p.reference} == {0.0}


def test_without_revisits_only_the_angles_remain() -> None:
    assert len(plan(rotation={"span_deg": 40, "step_deg": 2}, revisit_every=0)) == 21


def test_planes_roll_the_sensor_and_have_their_own_reference() -> None:
    points = plan(rotation={"span_deg": 40, "step_deg": 10, "planes_deg": [0, 90]}, revisit_every=50).points
    assert {round(math.degrees(p.pose[4])) for p in points} == {0, 90}
    second = [p for p in points if p.plane == 1]
    assert second[0].reference
    assert second[0].pose[4] == pytest.approx(math.pi / 2)


def test_repeats_run_to_and_fro() -> None:
    points = plan(rotation={"span_deg": 40, "step_deg": 20, "order": "one-way", "repeats": 2}, revisit_every=0).points
    assert [round(math.degrees(p.pose[3])) for p in points] == [-20, 0, 20, 20, 0, -20]


def test_listed_angles_can_keep_their_order() -> None:
    points = plan(rotation={"angles_deg": [5, -20, 0], "order": "as-listed"}, revisit_every=0).points
    assert [round(math.degrees(p.pose[3])) for p in points] == [5, -20, 0]


RASTER = {"directions": [{"axis": "x", "span_mm": 2, "step_mm": 1}, {"axis": "y", "span_mm": 2, "step_mm": 1}]}


def test_serpentine_neighbours_are_one_step_apart() -> None:
    points = plan(raster=RASTER, revisit_every=0).points
    steps = np.linalg.norm(np.diff([p.pose[:3] for p in points], axis=0), axis=1)
    assert len(points) == 9
    assert steps == pytest.approx(np.full(8, 1e-3))


def test_one_way_always_approaches_from_the_same_side() -> None:
    points = plan(raster=RASTER | {"order": "one-way"}, revisit_every=0).points
    rows = np.array([p.pose[0] for p in points]).reshape(3, 3)
    assert (np.diff(rows, axis=1) > 0).all()
    assert rows[:, 1] == pytest.approx(1e-3)  # about the middle of the scan's position


def test_a_plan_inside_the_travel_passes() -> None:
    check_travel(plan(rotation={"span_deg": 100, "step_deg": 10}), Pivot(), bench())


@pytest.mark.parametrize(
    ("tables", "pivot", "words"),
    [
        (
            {"rotation": {"span_deg": 140, "step_deg": 10}},
            Pivot(),
            "theta = -70 deg; bench a-bench allows -60 to 60 deg",
        ),
        ({"raster": RASTER}, Pivot(), "y = -1 mm, but bench a-bench has no such axis"),
        ({"rotation": {"span_deg": 100, "step_deg": 10}}, Pivot((20e-3, 0, 0)), "allows -5 to 5 mm"),
    ],
)
def test_a_plan_that_leaves_the_travel_is_refused_in_one_line(tables: Any, pivot: Pivot, words: str) -> None:
    with pytest.raises(PlanRefused) as refused:
        check_travel(plan(**tables), pivot, bench())
    assert words in str(refused.value)
    assert "\n" not in str(refused.value)


def test_a_way_through_a_keep_out_volume_is_refused_though_its_ends_are_free() -> None:
    line = plan(raster={"directions": [{"axis": "x", "span_mm": 4, "step_mm": 2}]}, revisit_every=0)
    post = {"name": "post", "low_mm": [-0.6, -1, 90], "high_mm": [-0.4, 1, 110]}
    with pytest.raises(PlanRefused, match="post"):
        check_travel(line, Pivot(), bench(keep_out=[post]))
    beside = post | {"low_mm": [-0.6, 1, 90], "high_mm": [-0.4, 2, 110]}
    check_travel(line, Pivot(), bench(keep_out=[beside]))
