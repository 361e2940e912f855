"""Whether a plan stays within the travel and out of the keep-out volumes, before anything moves.

The axes of a stage start together and move each at its own speed, so the way between two places is not the straight
line: all that is sure is that each axis stays between the two ends of its own move. So a way is free when the whole
box that these moves may sweep is free, the overrun that takes up backlash included.
"""

from __future__ import annotations

from collections.abc import Mapping
from dataclasses import dataclass
from itertools import pairwise
from math import pi, sin, sqrt
from typing import Any

from acquire.plan import AXIS_NUMBER, Plan
from acquire.pose import Pivot
from acquire.record import Five
from profiles.bench import Bench, KeepOut
from profiles.model import AXES, LINEAR_AXES
from profiles.units import DEG, MM

Three = tuple[float, float, float]
Plays = Mapping[int, tuple[float, float]]  # of axis numbers: overrun and low end of the travel, metres and radians


class PlanRefused(Exception):
    """The plan leaves the travel or enters a keep-out volume; the message names point, axis, value, limit."""


@dataclass(frozen=True)
class Swept:
    """The box in which the element centre stays during a move, metres."""

    low: Three
    high: Three

    def meets(self, box: KeepOut) -> bool:
        """Whether the two have a place in common."""
        return all(
            low <= top * MM and bottom * MM <= high
            for low, high, bottom, top in zip(self.low, self.high, box.low_mm, box.high_mm, strict=True)
        )


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


def plays_of(bench: Bench) -> Plays:
    """The axes whose backlash is to be taken up."""
    travel = limits(bench)
    found: dict[int, tuple[float, float]] = {}
    for axis in bench.axes.present():
        given: Any = getattr(bench.axes, axis)
        play = given.backlash_mm * MM if axis in LINEAR_AXES else given.backlash_deg * DEG
        if play:
            found[AXIS_NUMBER[axis]] = (play, travel[axis][0])
    return found


def approach_from(carriage: Five, plays: Plays) -> Five | None:
    """Where to come from so that every axis with backlash arrives upwards; None where there is no such place."""
    if not plays:
        return None
    x, y, z, theta, phi = (
        max(value - plays[number][0], plays[number][1]) if number in plays else value
        for number, value in enumerate(carriage)
    )
    below = (x, y, z, theta, phi)
    return below if below != carriage else None


def check_travel(plan: Plan, pivot: Pivot, bench: Bench) -> None:
    """Check every point, and the way to it from the one before, against travel and keep-out volumes.

    The way to the first point is looked at from the reference pose, where a vertical range may be looked for.

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
    if not bench.keep_out:
        return
    plays = plays_of(bench)
    poses = [plan.reference, *(point.pose for point in plan.points)]
    for index, (before, after) in enumerate(pairwise(poses)):
        box = obstacle(swept(before, after, pivot, plays), bench)
        if box is not None:
            raise PlanRefused(
                f"the way to point {index} may enter the keep-out volume {box.name!r} (each axis moves at its own "
                "speed): move the scan or change the bench profile"
            )


def check_way(start: Five, end: Five, pivot: Pivot, bench: Bench) -> None:
    """Check the way from where the element centre stands to a pose; a volume it stands in already may be left.

    Raises:
        PlanRefused: one line naming both places and the keep-out volume.
    """
    standing = Swept(start[:3], start[:3])
    boxes = tuple(box for box in bench.keep_out if not standing.meets(box))
    box = obstacle(swept(start, end, pivot, plays_of(bench)), bench.model_copy(update={"keep_out": boxes}))
    if box is not None:
        here, there = (", ".join(f"{value / MM:.4g}" for value in pose[:3]) for pose in (start, end))
        raise PlanRefused(
            f"the way from where the stage stands (element at {here} mm) to {there} mm may enter the keep-out volume "
            f"{box.name!r}: drive the stage to a free place first"
        )


def obstacle(way: Swept, bench: Bench) -> KeepOut | None:
    """The first keep-out volume that a move may enter."""
    return next((box for box in bench.keep_out if way.meets(box)), None)


def swept(start: Five, end: Five, pivot: Pivot, plays: Plays) -> Swept:
    """Where the element centre may come between two poses, each axis moving at its own speed.

    A turn by an angle moves a point at distance r from the axis by at most the chord 2 r sin(angle / 2); that much is
    added on all sides where the element is off the axis.
    """
    first, last = pivot.carriage_for(start), pivot.carriage_for(end)
    ends = (first, last, approach_from(last, plays) or last)
    low = [min(e[axis] for e in ends) for axis in range(5)]
    high = [max(e[axis] for e in ends) for axis in range(5)]
    turn = min(pi, high[3] - low[3] + high[4] - low[4])
    reach = 2 * sqrt(sum(e * e for e in pivot.offset)) * sin(turn / 2)
    off = [s - c for s, c in zip(start[:3], first[:3], strict=True)]  # the element centre seen from the carriage
    x0, y0, z0 = (v + o - reach for v, o in zip(low[:3], off, strict=True))
    x1, y1, z1 = (v + o + reach for v, o in zip(high[:3], off, strict=True))
    return Swept((x0, y0, z0), (x1, y1, z1))


def _outside(index: int, axis: str, value: float, low: float, high: float, bench: Bench) -> str:
    unit, factor = ("mm", MM) if axis in LINEAR_AXES else ("deg", DEG)
    if low == high == 0.0:
        return f"point {index} needs {axis} = {value / factor:.4g} {unit}, but bench {bench.name} has no such axis"
    return (
        f"point {index} needs {axis} = {value / factor:.4g} {unit}; bench {bench.name} allows "
        f"{low / factor:g} to {high / factor:g} {unit}"
    )
