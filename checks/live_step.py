"""Jumps of the arrival that no turn explains: the element has moved along the beam, and stays where it is now."""

from __future__ import annotations

from collections.abc import Iterable
from dataclasses import dataclass
from math import sqrt

import numpy as np

from checks.changepoint import ChangePoints, Tail
from checks.finding import Change, Finding, Size
from checks.pivot import COLUMNS, PivotEstimate, PivotFit, variance_of
from checks.recursion import Recursion
from checks.standing import Standing
from checks.wording import mm

SETTLED = 10  # points after which a single arrival can be held against the fit
MATTERS_M = 20e-6
IN_A_ROW = 3  # so many strays to one side are no strays
EVERY = 4  # so many arrivals apart a step is searched for
SLIGHTEST_S = 1e-11


@dataclass(frozen=True)
class Arrived:
    """One arrival of a scan."""

    theta: float
    time_s: float
    sigma_s: float
    order: int


class StepWatch:
    """`arrival.step`, and which arrivals the pivot fit may take.

    Model: arrivals scatter about the pivot fit; from some point on all are later, or earlier, by the same time.
    Statistic: the step of least squares over its standard deviation, at the likeliest of its beginnings
    (`checks.changepoint`), Student's t with n - 5 degrees of freedom. Threshold: false alarms per scan shared out
    over points; that the likeliest of many beginnings is taken is made up for by neighbouring tests being nearly the
    same one (tests count the false alarms).

    A single arrival that is as far from what the ones before it expect there (`checks.recursion`) is a stray: kept
    apart, for it must not pull the fit, until three in a row to one side make it a step. A step below 20 um is of no
    consequence: it is not told, and not put into the model.
    """

    def __init__(self, false_alarm_rate: float) -> None:
        self._rate = false_alarm_rate
        self._strays: list[tuple[Arrived, float]] = []
        self._known: Recursion | None = None
        self._candidates = ChangePoints(COLUMNS)
        self._standing = Standing()

    def take(self, fit: PivotFit, arrived: Arrived) -> bool:
        """Add an arrival to the fit, unless it is a stray; return whether a step has come into the fit."""
        known = self._known
        if known is None:
            self._add(fit, arrived)
            self._known = fit.recursion() if fit.points >= SETTLED else None
            return False
        row, value = fit.extended(arrived.theta, arrived.order), fit.value(arrived.time_s)
        variance = variance_of(arrived.sigma_s)
        apart, spread = known.apart(row, value, variance)
        t = apart / max(spread, SLIGHTEST_S)
        if abs(t) > self._limit(known.freedom) and abs(apart) * fit.speed_m_s >= MATTERS_M:
            return self._stray(fit, arrived, t)
        self._strays = []
        known.add(row, value, variance)
        self._add(fit, arrived)
        return fit.points % EVERY == 0 and self._search(fit, known)

    def _limit(self, freedom: int) -> float:
        """Student's t beyond which a value is not by chance; a bound, from above."""
        return sqrt(freedom * (self._rate ** (-2 / freedom) - 1))

    def _add(self, fit: PivotFit, arrived: Arrived) -> None:
        fit.add(arrived.theta, arrived.time_s, arrived.sigma_s, arrived.order)
        row, value = fit.extended(arrived.theta, arrived.order), fit.value(arrived.time_s)
        self._candidates.add(row, value, 1 / variance_of(arrived.sigma_s), arrived.order)

    def _stray(self, fit: PivotFit, arrived: Arrived, t: float) -> bool:
        """Far off: not added before it is known whether it stays."""
        if self._strays and self._strays[-1][1] * t < 0:
            self._strays = []
        self._strays.append((arrived, t))
        if len(self._strays) < IN_A_ROW:
            return False
        fit.step(Tail(np.zeros(COLUMNS), 0.0, 0, self._strays[0][0].order))
        self._candidates = ChangePoints(COLUMNS + 1)
        for one, _ in self._strays:
            self._add(fit, one)
        self._strays, self._known = [], fit.recursion()
        return True

    def _search(self, fit: PivotFit, known: Recursion) -> bool:
        """Whether a step lies among the arrivals that were taken."""
        likeliest = self._candidates.likeliest(known)
        if likeliest is None or likeliest[0] <= self._limit(known.freedom - 1):
            return False
        _, tail = likeliest
        weight, column = tail.column[0], tail.column
        step = (tail.moment - column @ known.coefficients) / (weight - column @ known.inverse @ column)
        if abs(step) * fit.speed_m_s < MATTERS_M:
            return False
        tail.column = column[:COLUMNS].copy()
        fit.step(tail)
        self._candidates = ChangePoints(COLUMNS + 1)
        self._known = fit.recursion()
        return True

    def say(self, fit: PivotFit, estimate: PivotEstimate | None, at: int) -> Iterable[Change]:
        """What there is to say of the last step, by the newest estimate of its size."""
        if estimate is None or estimate.step_s is None or fit.after is None:
            return []
        size, u = estimate.step_s * fit.speed_m_s, estimate.step_u_s * fit.speed_m_s
        if abs(size) < MATTERS_M * self._standing.ease:
            return self._standing.now(None, at)
        finding = Finding(
            code="arrival.step",
            severity="caution",
            summary=f"the arrival jumped by {estimate.step_s * 1e9:+.1f} ns, as if the element had moved "
            f"{mm(size, u)} along the beam",
            sizes=(Size("step", size, u, "m"),),
            points=(fit.after.first, at, fit.after.points),
            consequence="points before and after the jump were not taken at the same place",
            remedy="look for lost steps or a sensor that slipped in its holder; home the stage and repeat from point "
            f"{fit.after.first}",
        )
        return self._standing.now(finding, at)

    def finish(self) -> Iterable[Change]:
        """The last size of the last step."""
        return self._standing.last_word()
