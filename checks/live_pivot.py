"""The axis of rotation beside the element centre."""

from __future__ import annotations

from collections.abc import Iterable
from math import cos, degrees, hypot, log, sin, sqrt

import numpy as np

from checks.arrival import Arrival, SharedTracker
from checks.bent_wave import face_delay, wave_of
from checks.directivity import beam_w
from checks.finding import Change, Finding, Severity, Size
from checks.live_step import Arrived, StepWatch
from checks.observation import Circumstances, Observation
from checks.pivot import PivotEstimate, PivotFit
from checks.standing import Standing, due
from checks.water import speed_of_sound, speed_or
from checks.wavefront import SOURCE_U, wave_radius
from checks.wording import decibel, mhz, mm

FEWEST = 12
LEVEL_MATTERS_DB = 0.05  # at the largest angle; 0.6 % of the level
ANGLE_MATTERS = 2e-3  # rad: the element looks at the source under another angle
SURE = 2.0  # standard uncertainties that are taken off before an offset is said to matter
NEPER_DB = 20 / log(10)
FACE_U = 0.25  # of a²/R: the edge behaviour (a²/4R either way) and a radius known within some 20 %
LOBE = 3.0  # of x = k a sin(angle), where a main lobe has nearly ended
UNSURE = 0.3  # of the correction for the face, point by point: it grows towards a null that is not quite where thought
NULL_U, WEAK = 0.15, 0.05  # of a²/R; and the least level that counts as one
AVERAGED, SUDDEN_C = 10, 0.02  # points; and what is no slow change of the water
BEAM_KNOWN_DB = 20.0  # beyond this the Gaussian is no estimate of the beam


def _up_to(level_db: float) -> str:
    """A level error in words."""
    if level_db > BEAM_KNOWN_DB:
        return f"more than {decibel(BEAM_KNOWN_DB)}"
    return f"up to {decibel(level_db)}"


class PivotCheck:
    """`pivot.offset` and `arrival.step`.

    Model: t = t0 + (ez (cos - 1) - ex sin)/c + drift, see `checks.pivot`. Statistic: e' C^-1 e with the covariance
    scaled by the residuals; for a bench in order it is Hotelling's T-squared with 2 and n - 4 degrees of freedom
    (one less with a step), whose quantile has a closed form. Threshold: false alarms per scan shared out over its
    points.

    It speaks when the offset is significant *and* moves the wanted result: the element swings through the beam,
    whose width at the highest wanted frequency is estimated from that of a piston (`checks.directivity.beam_w`),
    or it sees the source under another angle. Where both components are there, the swing is not the same on both
    sides: such an asymmetry is told here, as a consequence, and not once more as an error of angle zero.

    Each plane of rotation has an offset of its own. Jumps: see `checks.live_step`.
    """

    def __init__(
        self, circumstances: Circumstances, false_alarm_rate: float, tracker: SharedTracker | None = None
    ) -> None:
        self._c = circumstances
        self._rate = false_alarm_rate
        self._tracker = tracker or SharedTracker(circumstances)
        self._plane = -1
        self._speed = speed_of_sound(20.0)
        self._fit = self._new_fit(self._speed)
        self._estimate: PivotEstimate | None = None
        self._largest = self._strongest = 0.0
        self._first = 0
        self._warm_s: float | None = None
        self._warmth: float | None = None
        self._offset = Standing()
        self._steps = StepWatch(false_alarm_rate)

    def _new_fit(self, speed_m_s: float) -> PivotFit:
        """A fit along the axis as the wave has it, with what is not known of the wave and of the face."""
        c = self._c
        self._wave = wave_of(c, speed_m_s)
        stretch = float(self._wave.stretch[0])
        return PivotFit(
            speed_m_s / stretch,
            wave_radius(c),
            c.planned_points,
            scale_u=hypot(c.speed_u, SOURCE_U * 2 * (1 - stretch)),
        )

    def _face_u_m(self) -> float:
        """How well that is known, as an offset z: the worse, the farther the angles go down the main lobe."""
        c = self._c
        x = min(float(self._wave.wavenumber[0]) * c.nominal_radius_m * sin(self._largest), LOBE)
        return FACE_U * c.nominal_radius_m**2 * abs(self._wave.bend) * (1 + (x / 2.5) ** 2)

    def _face(self, theta: float) -> float:
        """What the face of an element as in the profile hears too late, s; its edge in the middle of what may be."""
        c = self._c
        at, nowhere = np.array([theta]), np.zeros(1)
        return float(face_delay(at, nowhere, self._wave, c.nominal_radius_m, "unbaffled", self._speed)[0])

    def _unsure(self, face_s: float, seen: Observation) -> float:
        """Standard uncertainty of that, s. A null that is not quite where thought turns the phase as 1/level²."""
        self._strongest = max(self._strongest, abs(seen.components[0]))
        level = max(abs(seen.components[0]) / self._strongest, WEAK)
        whole = self._c.nominal_radius_m**2 * abs(self._wave.bend) / self._speed
        return hypot(UNSURE * face_s, NULL_U * whole * (1 / level**2 - 1))

    def update(self, seen: Observation) -> Iterable[Change]:
        """One more point."""
        arrival = self._tracker.update(seen)
        changes: list[Change] = []
        if seen.plane != self._plane:
            changes += self.finish()
            self._offset, self._steps, self._estimate = Standing(), StepWatch(self._rate), None
            self._plane, self._first = seen.plane, seen.index
            self._fit = self._new_fit(speed_or(seen.temperature_c, self._speed))
            self._largest = self._strongest = 0.0
        if not arrival.usable:
            return changes
        theta, face = seen.commanded.theta, self._face(seen.commanded.theta)
        time = self._at_first_temperature(arrival, seen) - face
        sigma = hypot(arrival.standard_uncertainty_s, self._unsure(face, seen))
        arrived = Arrived(theta, time, sigma, seen.index)
        before = self._fit.points
        stepped = self._steps.take(self._fit, arrived)
        self._largest = max(self._largest, abs(theta))
        if stepped or (self._fit.points > before and due(self._fit.points)):
            self._fit.face_u_m = self._face_u_m()
            self._estimate = self._fit.estimate()
            changes += self._steps.say(self._fit, self._estimate, seen.index)
            changes += self._offset.now(self._finding(seen.index), seen.index)
        return changes

    def finish(self) -> list[Change]:
        """The last sizes of offset and step."""
        return [*self._offset.last_word(), *self._steps.finish()]

    def _at_first_temperature(self, arrival: Arrival, seen: Observation) -> float:
        """Arrival as it would be at the temperature of the first point.

        Readings are averaged over some points, so that their last digit does not show: that lags behind a slow drift
        by a constant time, which changes nothing here. A sudden change is followed at once.
        """
        read = seen.temperature_c
        slow = self._warmth is not None and abs(read - self._warmth) < SUDDEN_C
        self._warmth = self._warmth + (read - self._warmth) / AVERAGED if slow and self._warmth is not None else read
        self._speed = speed_or(self._warmth, self._speed)
        travel = self._c.distance_m / self._speed
        if self._warm_s is None:
            self._warm_s = travel
        return arrival.time_s - travel + self._warm_s

    def _finding(self, at: int) -> Finding | None:
        fit, ease = self._estimate, self._offset.ease
        if fit is None or fit.points < FEWEST:
            return None
        freedom = fit.freedom
        statistic = float(np.array([fit.x_m, fit.z_m]) @ np.linalg.solve(fit.covariance, [fit.x_m, fit.z_m]))
        threshold = freedom * (self._rate ** (-2 / freedom) - 1)
        level, _, turned = self._consequence(fit, SURE)
        matters = level >= LEVEL_MATTERS_DB * ease or turned >= ANGLE_MATTERS * ease
        if statistic <= threshold * ease or not matters:
            return None
        return self._say(fit, at)

    def _consequence(self, fit: PivotEstimate, sure: float = 0.0) -> tuple[float, float, float]:
        """At the highest wanted frequency and the largest angle: level error and difference of the sides in dB.

        The third is the angle error in rad. A Gaussian beam: the level falls by exp(-X²/w²). Of the swing X, `sure`
        standard uncertainties are taken off: early on, a fit that hardly knows ez must not make much of it.
        """
        c = self._c
        rows = [np.array([cos(t) - 1, sin(t)]) for t in (self._largest, -self._largest)]
        offset = np.array([fit.x_m, fit.z_m])
        right, left = (
            max(0.0, abs(float(row @ offset)) - sure * sqrt(float(row @ fit.covariance @ row))) for row in rows
        )
        swing = max(abs(right), abs(left))
        w = float(beam_w(np.array([c.highest_wanted_hz]), c)[0])
        return (
            NEPER_DB * (swing / w) ** 2,
            NEPER_DB * abs(right**2 - left**2) / w**2,
            swing / c.distance_m,
        )

    def _say(self, fit: PivotEstimate, at: int) -> Finding:
        c = self._c
        level_db, sides_db, turned = self._consequence(fit)
        uneven = f", left and right differ by {_up_to(sides_db)}" if sides_db >= LEVEL_MATTERS_DB else ""
        ux, uz = sqrt(fit.covariance[0, 0]), sqrt(fit.covariance[1, 1])
        x, z = c.pivot_x_m + fit.x_m, c.pivot_z_m + fit.z_m
        left = " left after the correction" if (c.pivot_x_m or c.pivot_z_m) else ""
        severity: Severity = "caution"
        return Finding(
            code="pivot.offset",
            severity=severity,
            summary=f"the element centre is {hypot(fit.x_m, fit.z_m) * 1e3:.3f} mm from the axis of rotation{left}: "
            f"x = {mm(fit.x_m, ux)}, z = {mm(fit.z_m, uz)}",
            sizes=(Size("x", fit.x_m, ux, "m"), Size("z", fit.z_m, uz, "m")),
            points=(self._first, at, fit.points),
            consequence=f"at {degrees(self._largest):.0f}° the response at {mhz(c.highest_wanted_hz)} reads "
            f"{_up_to(level_db)} low{uneven}, and the element sees the source {degrees(turned):.2g}° off",
            remedy=f"apply the pivot correction x_mm = {x * 1e3:.3f}, z_mm = {z * 1e3:.3f}, or move the sensor in its "
            f"holder by {-fit.x_m * 1e3:+.3f} mm along x and {-fit.z_m * 1e3:+.3f} mm along z",
        )
