"""Drift of the reference: the same pose, visited again and again, should read the same."""

from __future__ import annotations

from collections.abc import Iterable
from math import log10, sqrt

from checks.finding import Change, Finding, Size
from checks.observation import Circumstances, Observation
from checks.standing import Standing
from checks.wording import decibel, rounded

FEWEST = 4
MATTERS_DB = 0.1


class DriftCheck:
    """`drift.reference`.

    Model: level of the drive frequency at the reference points, in dB, is linear in their place in the order of
    capture (never the clock: a replay must agree), with a level of its own for each plane of rotation and one slope.
    Statistic: slope over its standard uncertainty from the residuals, Student's t with n - 1 - planes degrees of
    freedom. Threshold: false alarms per scan shared out over points,
    by the bound (1 + t²/n)^(-n/2) on the tail; and the drift over the scan so far is 0.1 dB or more.
    """

    def __init__(self, circumstances: Circumstances, false_alarm_rate: float) -> None:
        self._rate = false_alarm_rate
        self._scale = max(1, circumstances.planned_points)
        self._n = self._here = self._planes = 0  # points in all, points of this plane
        self._plane: int | None = None
        self._mean_x = self._mean_y = self._sxx = self._sxy = self._syy = 0.0
        self._first = 0
        self._standing = Standing()

    def update(self, seen: Observation) -> Iterable[Change]:
        """One more point; only reference points count. Sums are updated by Welford's method."""
        strength = abs(complex(seen.components[0]))
        if not seen.reference or strength <= 0:
            return []
        if not self._n:
            self._first = seen.index
        x, y = seen.index / self._scale, 20 * log10(strength)
        if seen.plane != self._plane:
            self._plane, self._here, self._mean_x, self._mean_y = seen.plane, 0, 0.0, 0.0
            self._planes += 1
        self._n += 1
        self._here += 1
        dx, dy = x - self._mean_x, y - self._mean_y
        self._mean_x += dx / self._here
        self._mean_y += dy / self._here
        self._sxx += dx * (x - self._mean_x)
        self._sxy += dx * (y - self._mean_y)
        self._syy += dy * (y - self._mean_y)
        return self._standing.now(self._finding(seen.index), seen.index)

    def finish(self) -> Iterable[Change]:
        """The last size."""
        return self._standing.last_word()

    def _finding(self, at: int) -> Finding | None:
        freedom, ease = self._n - 1 - self._planes, self._standing.ease
        if freedom < FEWEST - 2 or self._sxx <= 0:
            return None
        slope = self._sxy / self._sxx
        spread = max(self._syy - slope * self._sxy, 1e-12) / freedom
        span = (at - self._first) / self._scale
        drift, u = slope * span, sqrt(spread / self._sxx) * span
        threshold = sqrt(freedom * (self._rate ** (-2 / freedom) - 1))
        if abs(drift) < MATTERS_DB * ease or abs(drift) <= threshold * u * ease:
            return None
        return Finding(
            code="drift.reference",
            severity="caution",
            summary=f"the level at the reference pose has drifted by {rounded(drift, u)} dB since point {self._first}",
            sizes=(Size("drift", drift, u, "dB"),),
            points=(self._first, at, self._n),
            consequence=f"levels taken late read up to {decibel(abs(drift))} {'high' if drift > 0 else 'low'}",
            remedy="let drive and water settle before the scan; look for bubbles on source and sensor",
        )
