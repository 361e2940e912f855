"""Where the element centre is when the carriage stands somewhere, and the other way round.

The pivot is the true axis of rotation. With `e` the element centre seen from that axis at angle zero, a turn by
theta about the axis moves the element centre by R e - e, so the carriage goes the other way to keep it in place:

    element = carriage + R(theta, phi) e - e,    R(theta, phi) = R_axis(theta) R_z(phi)

The axis is nominally parallel to y; `tilt_x` turns it about x (it leans towards z), `tilt_z` about z (it leans
towards minus x). phi rolls the sensor about its own axis before theta turns it. Derived here; for no tilt and
phi = 0 it is X = ex cos + ez sin, Z = -ex sin + ez cos.
"""

from __future__ import annotations

from dataclasses import dataclass
from functools import cached_property

import numpy as np
from numpy.typing import NDArray

from acquire.record import Five
from profiles.scan import PivotCorrection
from profiles.units import DEG, MM

Vector = NDArray[np.float64]


@dataclass(frozen=True)
class Pivot:
    """The pivot in metres and radians; the default is a perfect bench.

    Attributes:
        offset: element centre seen from the axis at angle zero, (x, y, z) in metres.
    """

    offset: tuple[float, float, float] = (0.0, 0.0, 0.0)
    tilt_x: float = 0.0
    tilt_z: float = 0.0

    @classmethod
    def from_profile(cls, given: PivotCorrection) -> Pivot:
        """The correction of a scan profile."""
        offset = (given.x_mm * MM, given.y_mm * MM, given.z_mm * MM)
        return cls(offset, given.tilt_x_deg * DEG, given.tilt_z_deg * DEG)

    @cached_property
    def axis(self) -> Vector:
        """Unit vector along the axis of rotation, shape (3,)."""
        cx, sx = np.cos(self.tilt_x), np.sin(self.tilt_x)
        cz, sz = np.cos(self.tilt_z), np.sin(self.tilt_z)
        return np.array([-sz * cx, cz * cx, sx])

    @cached_property
    def centred(self) -> bool:
        """Whether the element centre is on the axis, so that no turn moves it."""
        return not any(self.offset)

    def swing(self, theta: float, phi: float) -> Vector:
        """What a turn adds to the place of the element centre: R e - e, shape (3,), metres."""
        e = np.array(self.offset)
        cp, sp = np.cos(phi), np.sin(phi)
        rolled = np.array([cp * e[0] - sp * e[1], sp * e[0] + cp * e[1], e[2]])
        # Rodrigues' formula
        n, c, s = self.axis, np.cos(theta), np.sin(theta)
        turned = rolled * c + np.cross(n, rolled) * s + n * float(n @ rolled) * (1 - c)
        return np.asarray(turned - e)

    def carriage_for(self, pose: Five) -> Five:
        """Stage coordinates that put the element centre at `pose`."""
        if self.centred:
            return pose
        dx, dy, dz = self.swing(pose[3], pose[4])
        return (pose[0] - float(dx), pose[1] - float(dy), pose[2] - float(dz), pose[3], pose[4])

    def element_at(self, carriage: Five) -> Five:
        """Pose of the element centre when the stage stands at `carriage`."""
        if self.centred:
            return carriage
        dx, dy, dz = self.swing(carriage[3], carriage[4])
        return (
            carriage[0] + float(dx),
            carriage[1] + float(dy),
            carriage[2] + float(dz),
            carriage[3],
            carriage[4],
        )
