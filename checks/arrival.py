"""When the wave arrives at the element centre: from the phase of the lowest component.

A symmetric element has a real response, so the phase of a component follows its centre; a threshold crossing or a
correlation would shift with angle, because high frequencies fade. The phase leaves whole cycles open, and half
cycles past a null of the element. The group delay between two lines beside the drive frequency settles them; it is
open by the inverse of their spacing itself. Where the burst is so short that this is little, or the noise so large
that the group delay does not tell half a cycle, the arrival at the nearest angle among the points before does it.
"""

from __future__ import annotations

from collections import deque
from dataclasses import dataclass
from math import hypot, inf, isfinite, pi

import numpy as np

from checks.observation import Circumstances, Observation

WEAK = 0.05  # of the first point: below this the drive frequency is near a null of the element
SURE = 4.0  # standard deviations of the group delay that must fit into a quarter of a cycle
WIDEST_SWING_S = 1.5e-6  # an element centre 2 mm off the axis arrives so much earlier or later
NEAR_RAD = 0.06  # between two points so near the arrival of such an element moves by no more than 0.1 us
NEAR_S = 1e-7
REMEMBERED = 32
WATER_M_S = 1480.0  # only to tell whole periods apart


@dataclass(frozen=True)
class Arrival:
    """Arrival of the burst at the element centre, seconds, up to a constant of the scan.

    `usable` is False where the component is too weak for its phase to be believed.
    """

    time_s: float
    standard_uncertainty_s: float
    usable: bool


@dataclass(frozen=True)
class _Place:
    """An arrival and where the element was."""

    plane: int
    theta: float
    z: float
    time_s: float


class ArrivalTracker:
    """Arrivals of a scan, one point at a time, in order; memory does not grow."""

    def __init__(self, circumstances: Circumstances) -> None:
        self._drive_hz = circumstances.drive_hz
        low, high = circumstances.side_lines_hz
        self._spacing_hz = float(high - low)
        self._gate_s = circumstances.record_start_s + circumstances.gate.start * circumstances.sample_interval_s
        self._first: _Place | None = None
        self._between_s = self._strength = 0.0
        self._before: deque[_Place] = deque(maxlen=REMEMBERED)

    def update(self, seen: Observation) -> Arrival:
        """Arrival at one more point; the first point with a signal fixes the constant."""
        component = complex(seen.components[0])
        strength, noise = abs(component), float(seen.component_noise_v[0])
        nothing = Arrival(self._gate_s, inf, usable=False)
        if strength <= 0.0 or strength < 5 * noise:
            return nothing
        phase_s = -float(np.angle(component)) / (2 * pi * self._drive_hz)
        low, high = (complex(c) for c in seen.side_components)
        group_s = -float(np.angle(high * low.conjugate())) / (2 * pi * self._spacing_hz)
        if self._first is None:
            time = _nearest(phase_s, self._gate_s, 1 / self._drive_hz)
            self._first = _Place(seen.plane, seen.commanded.theta, seen.commanded.z, time)
            self._before.append(self._first)
            self._between_s, self._strength = group_s - time, strength
        coarse = self._coarse(seen, group_s - self._between_s, _group_sigma(low, high, noise) / self._spacing_hz)
        if coarse is None:
            return nothing
        time = _nearest(phase_s, coarse, 0.5 / self._drive_hz)  # past a null of the element the phase is turned by pi
        sigma = noise / (strength * 2 * pi * self._drive_hz)
        usable = isfinite(time) and strength >= WEAK * self._strength
        if usable:
            self._before.append(_Place(seen.plane, seen.commanded.theta, seen.commanded.z, time))
        return Arrival(time, sigma, usable)

    def _coarse(self, seen: Observation, group_s: float, group_sigma_s: float) -> float | None:
        """Arrival to within a quarter of a cycle, None where nothing tells it."""
        quarter, period = 0.25 / self._drive_hz, 1 / self._spacing_hz
        sure = SURE * group_sigma_s < quarter
        if sure and period > 2 * WIDEST_SWING_S:
            return _nearest(group_s, self._expected(seen, self._first), period)
        near = min(
            (p for p in self._before if p.plane == seen.plane or abs(seen.commanded.theta) < NEAR_RAD),
            key=lambda p: abs(p.theta - seen.commanded.theta),
            default=None,
        )
        expected = self._expected(seen, near or self._first)
        if sure:
            return _nearest(group_s, expected, period)
        # the swing of an element 2 mm off the axis over the angle between them
        close = near is not None and abs(near.theta - seen.commanded.theta) * WIDEST_SWING_S < min(quarter, NEAR_S)
        return expected if close else None

    def _expected(self, seen: Observation, place: _Place | None) -> float:
        return self._gate_s if place is None else place.time_s + (seen.commanded.z - place.z) / WATER_M_S


class SharedTracker:
    """One tracker for several checks that each ask for the same point, one after the other."""

    def __init__(self, circumstances: Circumstances) -> None:
        self._tracker = ArrivalTracker(circumstances)
        self._seen: Observation | None = None
        self._arrival = Arrival(0.0, inf, usable=False)

    def update(self, seen: Observation) -> Arrival:
        """Arrival at one more point, or at the same one again."""
        if seen is not self._seen:
            self._seen, self._arrival = seen, self._tracker.update(seen)
        return self._arrival


def _nearest(time_s: float, to_s: float, period_s: float) -> float:
    """The time, moved by whole periods to where it is nearest to another."""
    return time_s + round((to_s - time_s) / period_s) * period_s


def _group_sigma(low: complex, high: complex, noise: float) -> float:
    """Standard deviation that noise gives the phase between two lines, in turns."""
    if not abs(low) or not abs(high):
        return inf
    return hypot(noise / abs(low), noise / abs(high)) / (2 * pi)
