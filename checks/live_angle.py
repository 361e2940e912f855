"""Angle zero: the pattern is even about true normal incidence, so an odd part is an error of the stage's zero."""

from __future__ import annotations

from collections.abc import Iterable
from math import degrees, radians, sqrt

import numpy as np
from numpy.typing import NDArray

from checks.finding import Change, Finding, Severity, Size
from checks.observation import Circumstances, Observation
from checks.standing import Standing
from checks.wording import deg

TERMS = 5  # 1, s, s², s³, s⁴ with s = sin(theta)
MAIN_LOBE_DB = -8.0
FEWEST = 12
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
    """

    def __init__(self, circumstances: Circumstances, false_alarm_rate: float) -> None:
        lines = circumstances.frequencies_hz.size
        self._rate = false_alarm_rate
        self._normal = np.zeros((lines, TERMS, TERMS))
        self._moment = np.zeros((lines, TERMS))
        self._square = np.zeros(lines)
        self._count = np.zeros(lines, np.int64)
        self._reference: NDArray[np.float64] | None = None
        self._largest = np.zeros(lines)
        self._reached = np.zeros((lines, 2))  # largest |s| on either side
        self._standing = Standing()
        self._points = 0

    def update(self, seen: Observation) -> Iterable[Change]:
        """One more point."""
        strength = np.abs(seen.components)
        if self._reference is None:
            if not seen.reference and abs(seen.commanded.theta) > 1e-3:
                return []
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
        self._largest = np.maximum(self._largest, keep * abs(s))
        side = int(s > 0)
        self._reached[:, side] = np.maximum(self._reached[:, side], keep * abs(s))
        if self._points < FEWEST or seen.reference:
            return []
        return self._standing.now(self._finding(seen.index), seen.index)

    def finish(self) -> Iterable[Change]:
        """Nothing more to say."""
        return []

    def _finding(self, at: int) -> Finding | None:
        estimate = self._estimate()
        if estimate is None:
            return None
        zero, u, freedom = estimate
        threshold = sqrt(freedom * (self._rate ** (-2 / freedom) - 1))
        if abs(zero) < WORTH_SAYING or abs(zero) <= threshold * u:
            return None
        severity: Severity = "caution" if abs(zero) >= MATTERS else "note"
        return Finding(
            code="angle.zero",
            severity=severity,
            summary=f"the pattern is even about {deg(zero, u)} and not about the stage's zero",
            sizes=(Size("angle zero", zero, u, "rad"),),
            points=(0, at, self._points),
            consequence="half-angles differ between the sides, and radii from one side alone are wrong; the result "
            "fits angle zero and is free of it to first order",
            remedy=f"set the stage's zero at {degrees(zero):+.2f}°, or turn the sensor in its holder by as much",
        )

    def _estimate(self) -> tuple[float, float, int] | None:
        """theta0, its standard uncertainty, degrees of freedom; None while nothing can be said."""
        weights, values, freedom = [], [], 0
        both_sides = self._reached.min(axis=1) >= BALANCED * self._largest
        for line in np.nonzero((self._count >= FEWEST) & both_sides)[0]:
            scale = np.maximum(self._largest[line], 1e-6) ** np.arange(TERMS)
            normal = self._normal[line] / np.outer(scale, scale)
            if np.linalg.cond(normal) > 1e9:
                continue
            inverse = np.linalg.inv(normal)
            c = inverse @ (self._moment[line] / scale)
            if -c[2] < CURVED:
                continue
            left = int(self._count[line]) - TERMS
            spread = max(float(self._square[line] - c @ (self._moment[line] / scale)), 1e-12) / left
            zero = -c[1] / (2 * c[2]) * scale[1]
            variance = spread * inverse[1, 1] / (2 * c[2]) ** 2 * scale[1] ** 2
            variance += spread * inverse[2, 2] * (zero / c[2]) ** 2
            weights.append(1 / variance)
            values.append(zero)
            freedom = max(freedom, left)
        if not weights:
            return None
        w, v = np.array(weights), np.array(values)
        zero = float(w @ v / w.sum())
        scatter = float(w @ (v - zero) ** 2) / max(1, v.size - 1)
        # lines share jitter and swing, so they are not independent: the best single line bounds the uncertainty
        return zero, sqrt(max(1.0, scatter) / float(w.max())), freedom
