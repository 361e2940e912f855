"""Whether a plan stays within the travel and out of the keep-out volumes, before anything moves."""

from __future__ import annotations

from itertools import pairwise
from typing import Any

from acquire.plan import AXIS_NUMBER, Plan
from acquire.pose import Pivot
from acquire.record import Five
from profiles.bench import Bench, KeepOut
from profiles.model import AXES, LINEAR_AXES
from profiles.units import DEG, MM


class PlanRefused(Exception):
    """The plan leaves the travel or enters a keep-out volume; the message names point, axis, value, limit."""


def limits(bench: Bench) -> dict[str, tuple[float, float]]:
    """Travel of every axis in metres and radians; an axis that the bench has not stands at zero."""
    found: dict[str, tuple[float, float]] = {}
    for axis in AXES:
        given: Any = getattr(bench.axes, axis)
        if given is None:
            found[axis] = (0.0, 0.0)
        elif axis in LINEAR_AXES:
            found[axis] = (given.low_mm * MM, given.high_mm * MM)
        else:
            found[axis] = (given.low_deg * DEG, given.high_deg * DEG)
    return found


def check_travel(plan: Plan, pivot: Pivot, bench: Bench) -> None:
    """Check every point, and the straight way between neighbours, against travel and keep-out volumes.

    Raises:
        PlanRefused: one line naming point, axis, value and what is allowed.
    """
    travel = limits(bench)
    for point in plan.points:
        carriage = pivot.carriage_for(point.pose)
        for axis, (low, high) in travel.items():
            value = carriage[AXIS_NUMBER[axis]]
            if not low - 1e-9 <= value <= high + 1e-9:
                raise PlanRefused(_outside(point.index, axis, value, low, high, bench))
    for box in bench.keep_out:
        for before, after in pairwise(plan.points):
            if _crosses(before.pose, after.pose, box):
                raise PlanRefused(
                    f"the way to point {after.index} enters the keep-out volume {box.name!r}: "
                    "move the scan or change the bench profile"
                )


def _outside(index: int, axis: str, value: float, low: float, high: float, bench: Bench) -> str:
    unit, factor = ("mm", MM) if axis in LINEAR_AXES else ("deg", DEG)
    if low == high == 0.0:
        return f"point {index} needs {axis} = {value / factor:.4g} {unit}, but bench {bench.name} has no such axis"
    return (
        f"point {index} needs {axis} = {value / factor:.4g} {unit}; bench {bench.name} allows "
        f"{low / factor:g} to {high / factor:g} {unit}"
    )


def _crosses(start: Five, end: Five, box: KeepOut) -> bool:
    """Whether the straight line between two places meets the box (slab method)."""
    enter, leave = 0.0, 1.0
    for a, b, low_mm, high_mm in zip(start[:3], end[:3], box.low_mm, box.high_mm, strict=True):
        low, high, way = low_mm * MM, high_mm * MM, b - a
        if abs(way) < 1e-12:
            if not low <= a <= high:
                return False
            continue
        first, second = sorted(((low - a) / way, (high - a) / way))
        enter, leave = max(enter, first), min(leave, second)
    return enter <= leave
