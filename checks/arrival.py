"""When the wave arrives at the element centre: from the phase of the lowest component.

A symmetric element has a real response, so the phase of a component follows its centre; a threshold crossing or a
correlation would shift with angle, because high frequencies fade. The phase leaves whole cycles open, and half
cycles past a null of the element; the group delay between two lines beside the drive frequency settles them.
"""

from __future__ import annotations

from dataclasses import dataclass
from math import inf, isfinite, pi

import numpy as np

from checks.observation import Circumstances, Observation

WEAK = 0.05  # of the first reference: below this the drive frequency is near a null of the element


@dataclass(frozen=True)
class Arrival:
    """Arrival of the burst at the element centre, seconds, up to a constant of the scan.

    `usable` is False where the component is too weak for its phase to be believed.
    """

    time_s: float
    standard_uncertainty_s: float
    usable: bool


class ArrivalTracker:
    """Arrivals of a scan, one point at a time, in order."""

    def __init__(self, circumstances: Circumstances) -> None:
        self._drive_hz = circumstances.drive_hz
        low, high = circumstances.side_lines_hz
        self._spacing_hz = float(high - low)
        self._distance_m = circumstances.distance_m
        self._expected_s = circumstances.record_start_s + circumstances.gate.start * circumstances.sample_interval_s
        self._between: float | None = None
        self._strength = 0.0

    def update(self, seen: Observation) -> Arrival:
        """Arrival at one more point; the first point fixes the constant."""
        component = complex(seen.components[0])
        strength = abs(component)
        noise = float(seen.component_noise_v[0])
        if strength <= 0.0 or strength < 5 * noise:
            return Arrival(self._expected_s, inf, usable=False)
        cycle = 1 / self._drive_hz
        phase_s = -float(np.angle(component)) / (2 * pi * self._drive_hz)
        low, high = (complex(c) for c in seen.side_components)
        group_s = -float(np.angle(high * low.conjugate())) / (2 * pi * self._spacing_hz)
        if self._between is None:
            self._between = group_s - phase_s
            self._strength = strength
        # to the nearest half cycle: past a null of the element the phase is turned by pi
        halves = round(2 * (group_s - phase_s - self._between) / cycle)
        period = 1 / self._spacing_hz
        time = phase_s + halves * cycle / 2
        time += round((self._expected_s - time) / period) * period
        sigma = noise / (strength * 2 * pi * self._drive_hz)
        return Arrival(time, sigma, usable=isfinite(time) and strength >= WEAK * self._strength)
