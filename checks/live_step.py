"""Jumps of the arrival that no turn explains: the element has moved along the beam, and stays where it is now."""

from __future__ import annotations

from collections.abc import Iterable
from dataclasses import dataclass
from math import sqrt

from checks.cusum import Cusum, decision_limit, normal_score
from checks.finding import Change, Finding, Size
from checks.pivot import PivotEstimate, PivotFit
from checks.standing import Standing
from checks.wording import mm

SETTLED = 10  # points after which a single arrival can be held against the fit
MATTERS_M = 20e-6
IN_A_ROW = 3  # so many strays to one side are no strays
ALLOWANCE = 0.5  # of the cusum: the best for steps of one standard deviation, and good from half to three
SLIGHTEST_S = 1e-11


@dataclass(frozen=True)
class Arrived:
    """One arrival of a scan."""

    theta: float
    time_s: float
    sigma_s: float
    order: int

    def into(self, fit: PivotFit) -> None:
        """Add it to a fit."""
        fit.add(self.theta, self.time_s, self.sigma_s, self.order)


class StepWatch:
    """`arrival.step`, and which arrivals the pivot fit may take.

    Model: arrivals scatter about the pivot fit; at some point all later ones move by the same amount. Statistic:
    each arrival less what the fit of the ones before it expects there, over the standard deviation of that
    expectation. It is Student's t with the fit's degrees of freedom; as normal scores they feed a two-sided cusum
    (`checks.cusum`, with sources) whose limit is set so that its false alarms per value are those per scan shared
    out over its points. An arrival beyond that rate by itself is kept apart, as a stray, until three in a row to
    one side make it a step. The size comes from least squares over all points, with the step as one more unknown
    beside the pivot offset; a step below 20 um is of no consequence and not told.
    """

    def __init__(self, false_alarm_rate: float) -> None:
        self._rate = false_alarm_rate
        self._cusum = Cusum(ALLOWANCE, decision_limit(false_alarm_rate, ALLOWANCE))
        self._strays: list[tuple[Arrived, float]] = []
        self._before: dict[int, tuple[PivotFit, int]] = {}  # by side: the fit as it was when its sum left zero
        self._standing = Standing()
        self._first = 0

    def take(self, fit: PivotFit, estimate: PivotEstimate | None, arrived: Arrived) -> tuple[PivotFit, bool]:
        """Add an arrival, unless it is a stray; return the fit to go on with, and whether a step has come in."""
        if estimate is None or estimate.points < SETTLED or estimate.freedom < 1:
            arrived.into(fit)
            return fit, False
        expected, spread = estimate.expected(fit.row(arrived.theta, arrived.order))
        innovation = arrived.time_s - fit.taken_s - expected
        t = innovation / max(spread, SLIGHTEST_S)
        limit = sqrt(estimate.freedom * (self._rate ** (-2 / estimate.freedom) - 1))
        if abs(t) > limit and abs(innovation) * fit.speed_m_s >= MATTERS_M:
            return self._stray(fit, arrived, t)
        self._strays = []
        return self._gather(fit, arrived, normal_score(t, estimate.freedom))

    def _stray(self, fit: PivotFit, arrived: Arrived, t: float) -> tuple[PivotFit, bool]:
        """Far off: not added before it is known whether it stays, for it must not pull the fit."""
        if self._strays and self._strays[-1][1] * t < 0:
            self._strays = []
        self._strays.append((arrived, t))
        if len(self._strays) < IN_A_ROW:
            return fit, False
        fit = fit.stepped_after(fit)
        for one, _ in self._strays:
            one.into(fit)
        self._restart(self._strays[0][0].order)
        return fit, True

    def _gather(self, fit: PivotFit, arrived: Arrived, score: float) -> tuple[PivotFit, bool]:
        """Near the expectation: added, and added up."""
        for side, total in ((1, self._cusum.high), (-1, self._cusum.low)):
            if total <= 0 < side * score - ALLOWANCE:
                self._before[side] = (fit.copy(), arrived.order)
        arrived.into(fit)
        signal = self._cusum.add(score)
        if not signal:
            return fit, False
        before, first = self._before[signal]
        stepped = fit.stepped_after(before)
        found = stepped.estimate()
        if found is None or found.step_s is None or abs(found.step_s) * fit.speed_m_s < MATTERS_M:
            self._cusum.restart()
            return fit, False
        self._restart(first)
        return stepped, True

    def _restart(self, first: int) -> None:
        self._cusum.restart()
        self._strays, self._before, self._first = [], {}, first

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
            points=(self._first, at, fit.after.points),
            consequence="points before and after the jump were not taken at the same place",
            remedy="look for lost steps or a sensor that slipped in its holder; home the stage and repeat from point "
            f"{self._first}",
        )
        return self._standing.now(finding, at)

    def finish(self) -> Iterable[Change]:
        """The last size of the last step."""
        return self._standing.last_word()
