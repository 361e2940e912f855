"""Angle zero: the pattern is even about true normal incidence, so an odd part is an error of the stage's zero."""

from __future__ import annotations

from collections.abc import Iterable
from math import degrees, radians, sqrt

import numpy as np
from numpy.typing import NDArray

from checks.finding import Change, Finding, Severity, Size
from checks.observation import Circumstances, Observation
from checks.standing import Standing, due
from checks.wording import deg

TERMS = 5  # 1, s, s², s³, s⁴ with s = sin(theta)
MAIN_LOBE_DB = -8.0
FEWEST = 12
WORST_CONDITION = 1e9
MODEL_U = 0.02  # relative: what the fourth power leaves of the pattern, most where the sides are not yet equal
WORTH_SAYING = radians(0.15)
MATTERS = radians(0.5)
BALANCED = 0.8  # one side must reach so far of what the other does: an odd part needs both
CURVED = 0.2  # of the logarithm at the largest angle: flatter patterns do not see the zero


class AngleCheck:
    """`angle.zero`.

    Model, within the main lobe of each line: ln|V| = c0 + c1 s + c2 s² + c3 s³ + c4 s⁴, s = sin(theta). A pattern
    that is even about theta0 gives c1 = -2 c2 theta0, so theta0 = -c1/(2 c2) at every line; the lines are joined by
    their weights. Statistic: theta0 over its standard uncertainty, which holds the scatter of the residuals; for a
    bench in order it is Student's t. Threshold: false alarms per scan shared out over points (by the bound
    (1 + t²/n)^(-n/2) on its two-sided tail). It speaks from 0.15° on; the result takes angle zero from its own fit.
    Each plane of rotation begins anew.
    """

    def __init__(self, circumstances: Circumstances, false_alarm_rate: float) -> None:
        self._lines = circumstances.frequencies_hz.size
        self._rate = false_alarm_rate
        self._plane: int | None = None
        self._begin()

    def _begin(self) -> None:
        lines = self._lines
        self._normal = np.zeros((lines, TERMS, TERMS))
        self._moment = np.zeros((lines, TERMS))
        self._square = np.zeros(lines)
        self._count = np.zeros(lines, np.int64)
        self._reference: NDArray[np.float64] | None = None
        self._reached = np.zeros((lines, 2))  # largest |s| on either side
        self._standing = Standing()
        self._points = self._first = 0

    def update(self, seen: Observation) -> Iterable[Change]:
        """One more point."""
        changes: list[Change] = []
        if seen.plane != self._plane:
            changes += self._standing.last_word()
            self._begin()
            self._plane, self._first = seen.plane, seen.index
        strength = np.abs(seen.components)
        if self._reference is None:
            if not seen.reference and abs(seen.commanded.theta) > 1e-3:
                return changes
            self._reference = np.maximum(strength, 1e-300)
        self._points += 1
        relative = strength / self._reference
        usable = (relative > 10 ** (MAIN_LOBE_DB / 20)) & (strength > 10 * seen.component_noise_v)
        s = float(np.sin(seen.commanded.theta))
        row = s ** np.arange(TERMS)
        log = np.where(usable, np.log(np.maximum(relative, 1e-12)), 0.0)
        keep = usable.astype(np.float64)
        self._normal += keep[:, None, None] * np.outer(row, row)
        self._moment += log[:, None] * row
        self._square += log**2
        self._count += usable
        side = int(s > 0)
        self._reached[:, side] = np.maximum(self._reached[:, side], keep * abs(s))
        if self._points >= FEWEST and due(self._points):
            changes += self._standing.now(self._finding(seen.index), seen.index)
        return changes

    def finish(self) -> Iterable[Change]:
        """The last size."""
        return self._standing.last_word()

    def _finding(self, at: int) -> Finding | None:
        estimate = self._estimate()
        if estimate is None:
            return None
        zero, u, freedom = estimate
        threshold = sqrt(freedom * (self._rate ** (-2 / freedom) - 1))
        ease = self._standing.ease
        if abs(zero) < WORTH_SAYING * ease or abs(zero) <= threshold * u * ease:
            return None
        severity: Severity = "caution" if abs(zero) >= MATTERS else "note"
        return Finding(
            code="angle.zero",
            severity=severity,
            summary=f"the pattern is even about {deg(zero, u)} and not about the stage's zero",
            sizes=(Size("angle zero", zero, u, "rad"),),
            points=(self._first, at, self._points),
            consequence="half-angles differ between the sides, and radii from one side alone are wrong; the result "
            "fits angle zero and is free of it to first order",
            remedy=f"set the stage's zero at {degrees(zero):+.2f}°, or turn the sensor in its holder by as much",
        )

    def _estimate(self) -> tuple[float, float, int] | None:
        """theta0, its standard uncertainty, degrees of freedom; None while nothing can be said."""
        largest = self._reached.max(axis=1)
        both_sides = self._reached.min(axis=1) >= BALANCED * largest
        lines = np.nonzero((self._count >= FEWEST) & both_sides & (largest > 1e-6))[0]
        if not lines.size:
            return None
        scale = largest[lines, None] ** np.arange(TERMS)
        normal = self._normal[lines] / (scale[:, :, None] * scale[:, None, :])
        moment = self._moment[lines] / scale
        values, vectors = np.linalg.eigh(normal)
        values = np.maximum(values, 1e-300)
        inverse = (vectors / values[:, None, :]) @ vectors.transpose(0, 2, 1)
        c = (inverse @ moment[:, :, None])[:, :, 0]
        good = (values[:, 0] * WORST_CONDITION > values[:, -1]) & (-c[:, 2] > CURVED)
        if not good.any():
            return None
        lines, scale, moment, inverse, c = lines[good], scale[good], moment[good], inverse[good], c[good]
        left = self._count[lines] - TERMS
        spread = np.maximum(self._square[lines] - (c * moment).sum(axis=1), 1e-12) / left
        zeros = -c[:, 1] / (2 * c[:, 2])
        variance = spread * (inverse[:, 1, 1] / (2 * c[:, 2]) ** 2 + inverse[:, 2, 2] * (zeros / c[:, 2]) ** 2)
        w, v = 1 / (variance * scale[:, 1] ** 2), zeros * scale[:, 1]
        zero = float(w @ v / w.sum())
        scatter = float(w @ (v - zero) ** 2) / max(1, v.size - 1)
        # lines share jitter and swing, so they are not independent: the best single line bounds the uncertainty
        best = int(np.argmax(w))
        variance_of_zero = max(1.0, scatter) / float(w[best]) + (MODEL_U * zero) ** 2
        return zero, sqrt(variance_of_zero), int(left[best])
