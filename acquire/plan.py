"""From a scan profile to the list of points to visit."""

from __future__ import annotations

from collections.abc import Iterable, Iterator
from dataclasses import dataclass
from itertools import product
from typing import Literal

import numpy as np

from acquire.angles import angles
from acquire.order import ordered
from acquire.record import Five
from profiles.scan import Raster, RasterAxis, Rotation, Scan
from profiles.units import DEG, MM

AXIS_NUMBER = {"x": 0, "y": 1, "z": 2, "theta": 3, "phi": 4}


@dataclass(frozen=True)
class PlanPoint:
    """A point to visit: pose of the element centre in metres and radians."""

    index: int
    pose: Five
    reference: bool
    plane: int


@dataclass(frozen=True)
class Plan:
    """All points in order of visiting.

    Attributes:
        moving: the axes that change, fastest first.
        reference: the pose that is revisited.
    """

    scan_type: Literal["rotation", "raster"]
    points: tuple[PlanPoint, ...]
    moving: tuple[str, ...]
    reference: Five

    def __len__(self) -> int:
        return len(self.points)


def make_plan(scan: Scan, radius_m: float, speed_m_s: float) -> Plan:
    """Plan of a scan; nominal element radius and speed of sound choose the step where the scan leaves it open."""
    p = scan.position
    middle: Five = (p.x_mm * MM, p.y_mm * MM, p.z_mm * MM, 0.0, 0.0)
    if scan.rotation is not None:
        visits = _rotation(scan.rotation, middle, radius_m, speed_m_s)
        planes = scan.rotation.planes_deg
        moving = ("theta", "phi") if len(planes) > 1 else ("theta",)
        numbered = _with_revisits(visits, scan.revisit_every)
        return Plan("rotation", tuple(numbered), moving, middle)
    if scan.raster is None:
        raise ValueError("a scan has a rotation or a raster")
    visits = ((pose, middle, 0) for pose in _raster(scan.raster, middle))
    numbered = _with_revisits(visits, scan.revisit_every)
    return Plan("raster", tuple(numbered), tuple(d.axis for d in scan.raster.directions), middle)


Visit = tuple[Five, Five, int]  # pose, its reference pose, plane


def _rotation(rotation: Rotation, middle: Five, radius_m: float, speed_m_s: float) -> Iterator[Visit]:
    """Poses plane by plane; a repeat runs the other way, so that drift cancels further."""
    theta = angles(rotation, radius_m, speed_m_s)
    if rotation.order == "as-listed" and rotation.angles_deg is not None:
        theta = np.radians(np.array(rotation.angles_deg))
    permutation = ordered(theta.size, rotation.order)
    for plane, phi_deg in enumerate(rotation.planes_deg):
        phi = phi_deg * DEG
        reference: Five = (*middle[:3], 0.0, phi)
        for repeat in range(rotation.repeats):
            for i in permutation if repeat % 2 == 0 else permutation[::-1]:
                yield (*middle[:3], float(theta[i]), phi), reference, plane


def _with_revisits(visits: Iterable[Visit], every: int) -> Iterator[PlanPoint]:
    """Number the points; start and end with the reference pose, and go back to it after every `every` points."""
    index = 0
    since = every
    last: Visit | None = None
    for pose, reference, plane in visits:
        new_plane = last is None or plane != last[2]
        if every and (since >= every or new_plane):
            yield PlanPoint(index, reference, True, plane)
            index, since = index + 1, 0
        at_reference = pose == reference
        yield PlanPoint(index, pose, at_reference, plane)
        index, since = index + 1, since + 1
        last = (pose, reference, plane)
    if every and last is not None:
        yield PlanPoint(index, last[1], True, last[2])


def _offsets(direction: RasterAxis) -> list[float]:
    """Positions along one direction of a raster, metres from its middle, ascending."""
    steps = int(direction.span_mm / direction.step_mm / 2 + 1e-9)
    return [i * direction.step_mm * MM for i in range(-steps, steps + 1)]


def _raster(raster: Raster, middle: Five) -> Iterator[Five]:
    """Poses with the first direction fastest; serpentine turns every other row around."""
    numbers = [AXIS_NUMBER[d.axis] for d in raster.directions]
    fast = _offsets(raster.directions[0])
    slow = [_offsets(d) for d in reversed(raster.directions[1:])]
    for row, outer in enumerate(product(*slow)):
        backwards = raster.order == "serpentine" and row % 2 == 1
        for offset in reversed(fast) if backwards else fast:
            pose = list(middle)
            for number, value in zip(numbers, (offset, *reversed(outer)), strict=True):
                pose[number] += value
            yield (pose[0], pose[1], pose[2], pose[3], pose[4])
