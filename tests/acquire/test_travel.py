"""Ways between points: what an uncoordinated move may sweep stays out of the keep-out volumes."""

from __future__ import annotations

import numpy as np
import pytest
from hypothesis import given
from hypothesis import strategies as st

from acquire.pose import Pivot
from acquire.record import Five
from acquire.travel import PlanRefused, approach_from, check_travel, check_way, limits, plays_of, swept
from profiles.bench import Bench
from tests.acquire.test_plan import bench, plan

POST = {"name": "post", "low_mm": [0.4, -1, 99], "high_mm": [0.6, 1, 99.4]}
millimetres = st.floats(-20e-3, 20e-3)
pivots = st.builds(Pivot, st.tuples(millimetres, millimetres, millimetres), st.floats(-0.3, 0.3), st.floats(-0.3, 0.3))
poses = st.tuples(
    millimetres, millimetres, st.floats(0.02, 0.3), st.floats(-np.pi / 2, np.pi / 2), st.floats(-np.pi, np.pi)
)


@given(pivots, poses, poses, st.lists(st.floats(0, 1), min_size=5, max_size=5))
def test_wherever_each_axis_is_on_its_way_the_element_is_inside_what_is_swept(
    pivot: Pivot, start: Five, end: Five, progress: list[float]
) -> None:
    first, last = pivot.carriage_for(start), pivot.carriage_for(end)
    x, y, z, theta, phi = (a + (b - a) * p for a, b, p in zip(first, last, progress, strict=True))
    element = pivot.element_at((x, y, z, theta, phi))
    way = swept(start, end, pivot, {})
    for value, low, high in zip(element, way.low, way.high, strict=False):
        assert low - 1e-12 <= value <= high + 1e-12


def test_a_corner_that_the_straight_line_cuts_is_looked_at_too() -> None:
    # x and z change together when the raster goes to its next row; the straight line passes 0.3 mm from the post
    directions = [{"axis": "x", "span_mm": 4, "step_mm": 2}, {"axis": "z", "span_mm": 2, "step_mm": 1}]
    raster = plan(raster={"directions": directions, "order": "one-way"}, revisit_every=0)
    post = {"name": "post", "low_mm": [2.2, -1, 99.5], "high_mm": [2.4, 1, 99.6]}
    with pytest.raises(PlanRefused, match=r"the way to point 3 may enter the keep-out volume 'post'"):
        check_travel(raster, Pivot(), bench(keep_out=[post]))


def loose(**tables: object) -> Bench:
    axes = {
        "x": {"low_mm": -5, "high_mm": 5, "speed_mm_per_s": 10, "backlash_mm": 0.5},
        "z": {"low_mm": 50, "high_mm": 150, "speed_mm_per_s": 10},
    }
    return bench(axes=axes, **tables)


def test_the_overrun_that_takes_up_backlash_is_part_of_the_way() -> None:
    line = plan(raster={"directions": [{"axis": "x", "span_mm": 2, "step_mm": 1}]}, revisit_every=0)
    below = {"name": "wall", "low_mm": [-2, -1, 90], "high_mm": [-0.3, 1, 110]}
    check_travel(line, Pivot(), bench(keep_out=[below]))
    with pytest.raises(PlanRefused, match="wall"):
        check_travel(line, Pivot(), loose(keep_out=[below]))


def test_the_overrun_ends_at_the_end_of_the_travel() -> None:
    plays = plays_of(loose())
    assert approach_from((0.0, 0.0, 0.1, 0.0, 0.0), plays) == pytest.approx((-0.5e-3, 0.0, 0.1, 0.0, 0.0))
    assert approach_from((-4.8e-3, 0.0, 0.1, 0.0, 0.0), plays) == pytest.approx((-5e-3, 0.0, 0.1, 0.0, 0.0))
    assert approach_from((-5e-3, 0.0, 0.1, 0.0, 0.0), plays) is None
    assert approach_from((1e-3, 0.0, 0.1, 0.0, 0.0), plays_of(bench())) is None


def test_a_keep_out_volume_in_which_the_element_stands_may_be_left_but_not_entered() -> None:
    inside, outside = (0.5e-3, 0.0, 99.2e-3, 0.0, 0.0), (3e-3, 0.0, 99.2e-3, 0.0, 0.0)
    guarded = bench(keep_out=[POST])
    check_way(inside, outside, Pivot(), guarded)
    with pytest.raises(PlanRefused, match=r"element at 3, 0, 99\.2 mm\) to 0\.5, 0, 99\.2 mm .* 'post'"):
        check_way(outside, inside, Pivot(), guarded)


def test_an_axis_that_is_not_there_stands_at_zero() -> None:
    assert limits(bench())["y"] == (0.0, 0.0)
