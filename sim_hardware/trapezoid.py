"""How a distance is covered in time: up with constant acceleration, cruise, down again; and braking from a speed.

Distances are fractions of a move (1 is all of it), so that several axes can follow one law and stay on a line.
"""

from __future__ import annotations

from dataclasses import dataclass
from math import sqrt
from typing import Protocol


class Law(Protocol):
    """Distance covered against time since the start; before it zero, after `duration_s` the whole."""

    @property
    def duration_s(self) -> float:
        """Time until it stands."""
        ...

    @property
    def acceleration(self) -> float:
        """Per second squared."""
        ...

    def travelled(self, t: float) -> float:
        """Distance covered."""
        ...

    def speed(self, t: float) -> float:
        """Per second."""
        ...


@dataclass(frozen=True)
class Trapezoid:
    """Covers a distance of 1; a triangle when the cruising speed is not reached."""

    acceleration: float
    cruise: float
    ramp_s: float
    duration_s: float

    @classmethod
    def plan(cls, speed: float, acceleration: float) -> Trapezoid:
        """With these limits, per second and per second squared."""
        cruise = min(speed, sqrt(acceleration))
        ramp = cruise / acceleration
        return cls(acceleration, cruise, ramp, ramp + 1.0 / cruise)

    def travelled(self, t: float) -> float:
        """Distance covered."""
        if t <= 0:
            return 0.0
        if t >= self.duration_s:
            return 1.0
        if t < self.ramp_s:
            return 0.5 * self.acceleration * t * t
        left = self.duration_s - t
        if left < self.ramp_s:
            return 1.0 - 0.5 * self.acceleration * left * left
        return self.cruise * (t - 0.5 * self.ramp_s)

    def speed(self, t: float) -> float:
        """Per second."""
        return max(0.0, min(self.cruise, self.acceleration * t, self.acceleration * (self.duration_s - t)))


@dataclass(frozen=True)
class Brake:
    """From a speed to rest with constant deceleration."""

    start_speed: float
    acceleration: float

    @property
    def duration_s(self) -> float:
        """Time until it stands."""
        return self.start_speed / self.acceleration

    def travelled(self, t: float) -> float:
        """Distance covered."""
        if self.start_speed == 0.0:
            return 0.0  # whatever the deceleration, infinite included
        t = min(max(t, 0.0), self.duration_s)
        return t * (self.start_speed - 0.5 * self.acceleration * t)

    def speed(self, t: float) -> float:
        """Per second."""
        return max(0.0, self.start_speed - self.acceleration * max(t, 0.0))


STANDING = Brake(0.0, 1.0)
