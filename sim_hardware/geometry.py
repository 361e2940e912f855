"""Where the element of the simulated sensor truly is, and which way its face looks.

Coordinates are those of the bench: z along the beam away from the source, origin at the centre of its face; a
positive theta turns about +y, so that a vector (dx, dz) becomes (dx cos + dz sin, -dx sin + dz cos).
"""

from __future__ import annotations

from dataclasses import dataclass

import numpy as np
from numpy.typing import NDArray

from sim_hardware.capture import Carriage
from sim_hardware.truth import MechanicsTruth

Vector = NDArray[np.float64]
Matrix = NDArray[np.float64]
_NO_SHIFT = np.zeros(3)


@dataclass(frozen=True)
class Placement:
    """The element in space.

    Attributes:
        centre: shape (3,), m.
        normal: shape (3,), unit vector out of the face, towards the source at normal incidence.
        across, upward: shape (3,), unit vectors in the face: its own x and y.
    """

    centre: Vector
    normal: Vector
    across: Vector
    upward: Vector


def turn(axis: Vector, angle_rad: float) -> Matrix:
    """Right-handed rotation about a unit vector, shape (3, 3)."""
    x, y, z = axis
    cross = np.array([[0, -z, y], [z, 0, -x], [-y, x, 0]])
    rotation: Matrix = np.eye(3) + np.sin(angle_rad) * cross + (1 - np.cos(angle_rad)) * (cross @ cross)
    return rotation


class Mount:
    """The way from what the mechanics do to where the element is."""

    def __init__(self, mechanics: MechanicsTruth) -> None:
        x, y, z = np.eye(3)
        tilt_x = np.radians(mechanics.axis_tilt_x_deg)
        tilt_z = np.radians(mechanics.axis_tilt_z_deg)
        self.axis: Vector = turn(z, tilt_z) @ turn(x, tilt_x) @ y
        self._z = z
        self._zero = turn(y, np.radians(mechanics.angle_zero_deg))
        self._offset: Vector = np.asarray(mechanics.pivot_offset_mm) * 1e-3

    def place(self, carriage: Carriage, shift: Vector = _NO_SHIFT) -> Placement:
        """Where the element is for a state of the mechanics.

        At angle zero the element centre is where the stage's coordinates say. The roll phi turns the sensor with
        its offset about its own z before theta turns it about the axis.

        Args:
            carriage: state of the mechanics.
            shift: shape (3,), m, how far the sensor has slipped in its holder, at angle zero.
        """
        rotation = turn(self.axis, carriage.theta)
        roll = turn(self._z, carriage.phi)
        swung = rotation @ (roll @ (self._offset + shift))
        frame = rotation @ self._zero @ roll
        centre = np.array([carriage.x, carriage.y, carriage.z]) + swung - self._offset
        return Placement(centre=centre, normal=-frame[:, 2], across=frame[:, 0], upward=frame[:, 1])
