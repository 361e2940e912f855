"""The axis of rotation beside the element centre, and jumps of the arrival that no turn explains."""

from __future__ import annotations

from collections.abc import Iterable
from math import cos, degrees, hypot, log, sin, sqrt

import numpy as np

from checks.arrival import Arrival, ArrivalTracker
from checks.directivity import beam_w
from checks.finding import Change, Finding, Severity, Size
from checks.observation import Circumstances, Observation
from checks.pivot import PivotEstimate, PivotFit
from checks.standing import Standing, due
from checks.water import speed_of_sound, speed_or
from checks.wording import decibel, mhz, mm

FEWEST = 12
SETTLED = 10  # points after which a single arrival can be held against the fit
LEVEL_MATTERS_DB = 0.05  # at the largest angle; 0.6 % of the level
ANGLE_MATTERS = 2e-3  # rad: the element looks at the source under another angle
STEP_MATTERS_M = 20e-6
STEP_POINTS = 3  # in a row, to one side
NEPER_DB = 20 / log(10)
BEAM_KNOWN_DB = 20.0  # beyond this the Gaussian is no estimate of the beam


def _up_to(level_db: float) -> str:
    """A level error in words."""
    if level_db > BEAM_KNOWN_DB:
        return f"more than {decibel(BEAM_KNOWN_DB)}"
    return f"up to {decibel(level_db)}"


class PivotCheck:
    """`pivot.offset` and `arrival.step`.

    Model: t = t0 + (ez (cos - 1) - ex sin)/c + drift, see `checks.pivot`. Statistic: e' C^-1 e with the covariance
    scaled by the residuals; for a bench in order it is Hotelling's T-squared with 2 and n - 4 degrees of freedom,
    whose quantile has a closed form. Threshold: false alarms per scan shared out over its points.

    It speaks when the offset is significant *and* moves the wanted result: the element swings through the beam,
    whose width at the highest wanted frequency is estimated from that of a piston (`checks.directivity.beam_w`),
    or it sees the source under another angle. Where both components are there, the swing is not the same on both
    sides: such an asymmetry is told here, as a consequence, and not once more as an error of angle zero.

    A jump: the arrival of one point against what the fit of the ones before it expects there, over the standard
    deviation of that expectation; Student's t with n - 4 degrees of freedom, three in a row to one side.

    Each plane of rotation has an offset of its own.
    """

    def __init__(self, circumstances: Circumstances, false_alarm_rate: float) -> None:
        self._c = circumstances
        self._rate = false_alarm_rate
        self._tracker = ArrivalTracker(circumstances)
        self._plane = -1
        self._speed = speed_of_sound(20.0)
        self._fit = self._new_fit(self._speed)
        self._estimate: PivotEstimate | None = None
        self._largest = 0.0
        self._first = 0
        self._warm_s: float | None = None
        self._run: list[tuple[float, float]] = []
        self._shift_s = 0.0
        self._offset = Standing()
        self._step = Standing()
        self._step_from = 0

    def _new_fit(self, speed_m_s: float) -> PivotFit:
        return PivotFit(speed_m_s, self._c.distance_m, self._c.planned_points)

    def update(self, seen: Observation) -> Iterable[Change]:
        """One more point."""
        arrival = self._tracker.update(seen)
        changes: list[Change] = []
        if seen.plane != self._plane:
            changes += self._offset.last_word()
            self._offset, self._estimate = Standing(), None
            self._plane, self._first = seen.plane, seen.index
            self._fit = self._new_fit(speed_or(seen.temperature_c, self._speed))
            self._largest, self._run, self._shift_s = 0.0, [], 0.0
        if not arrival.usable:
            return changes
        time = self._at_first_temperature(arrival, seen) - self._shift_s
        theta = seen.commanded.theta
        if self._estimate is not None and self._jumps(self._estimate, theta, time, seen.index):
            changes += self._jump(seen.index)
            if self._run:
                return changes  # not yet known whether it stays: it must not pull the fit
            time = self._at_first_temperature(arrival, seen) - self._shift_s
        self._fit.add(theta, time, arrival.standard_uncertainty_s, seen.index)
        self._largest = max(self._largest, abs(theta))
        if due(self._fit.points):
            self._estimate = self._fit.estimate()
            changes += self._offset.now(self._finding(seen.index), seen.index)
        return changes

    def finish(self) -> Iterable[Change]:
        """The last size of the offset."""
        return self._offset.last_word()

    def _at_first_temperature(self, arrival: Arrival, seen: Observation) -> float:
        """Arrival as it would be at the temperature of the first point."""
        self._speed = speed_or(seen.temperature_c, self._speed)
        travel = self._c.distance_m / self._speed
        if self._warm_s is None:
            self._warm_s = travel
        return arrival.time_s - travel + self._warm_s

    # --- the offset -------------------------------------------------------------------------------------

    def _finding(self, at: int) -> Finding | None:
        fit, ease = self._estimate, self._offset.ease
        if fit is None or fit.points < FEWEST:
            return None
        freedom = fit.points - 4
        statistic = float(np.array([fit.x_m, fit.z_m]) @ np.linalg.solve(fit.covariance, [fit.x_m, fit.z_m]))
        threshold = freedom * (self._rate ** (-2 / freedom) - 1)
        level, _, turned = self._consequence(fit)
        matters = level >= LEVEL_MATTERS_DB * ease or turned >= ANGLE_MATTERS * ease
        if statistic <= threshold * ease or not matters:
            return None
        return self._say(fit, at)

    def _consequence(self, fit: PivotEstimate) -> tuple[float, float, float]:
        """At the highest wanted frequency and the largest angle: level error and difference of the sides in dB.

        The third is the angle error in rad. A Gaussian beam: the level falls by exp(-X²/w²).
        """
        c = self._c
        right, left = (fit.x_m * (cos(t) - 1) + fit.z_m * sin(t) for t in (self._largest, -self._largest))
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

    # --- a jump -----------------------------------------------------------------------------------------

    def _jumps(self, fit: PivotEstimate, theta: float, time: float, order: int) -> bool:
        if fit.points < SETTLED:
            return False
        expected, spread = fit.expected(self._fit.row(theta, order))
        innovation, spread = time - expected, max(spread, 1e-11)
        freedom = fit.points - 4
        far = abs(innovation) > spread * sqrt(freedom * (self._rate ** (-2 / freedom) - 1))
        if not far or abs(innovation) * self._fit.speed_m_s < STEP_MATTERS_M:
            self._run = []
            return False
        if self._run and self._run[-1][0] * innovation < 0:
            self._run = []
        self._run.append((innovation, spread))
        return True

    def _jump(self, at: int) -> list[Change]:
        """After several points to one side the step is believed, said, and taken out of what follows."""
        if len(self._run) == 1:
            self._step_from = at
        if len(self._run) < STEP_POINTS:
            return []
        size_s = sum(size for size, _ in self._run) / len(self._run)
        # the expectations lean on one fit and are wrong together: no division by the root of their number
        spread = max(spread for _, spread in self._run)
        self._shift_s += size_s
        self._run = []
        return self._step.now(self._say_step(size_s, spread), at)

    def _say_step(self, size_s: float, spread_s: float) -> Finding:
        c = self._fit.speed_m_s
        return Finding(
            code="arrival.step",
            severity="caution",
            summary=f"the arrival jumped by {size_s * 1e9:+.1f} ns, as if the element had moved "
            f"{mm(size_s * c, spread_s * c)} along the beam",
            sizes=(Size("step", size_s * c, spread_s * c, "m"),),
            points=(self._step_from, self._step_from + STEP_POINTS - 1, STEP_POINTS),
            consequence="points before and after the jump were not taken at the same place",
            remedy="look for lost steps or a sensor that slipped in its holder; home the stage and repeat from point "
            f"{self._step_from}",
        )
