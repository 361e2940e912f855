"""Cumulative sums that find a small lasting shift of a mean, and how often they err.

A tabular cusum adds up standardised values less an allowance k and signals above a limit h (E. S. Page, Biometrika
41, 100 (1954); NIST/SEMATECH e-Handbook of Statistical Methods, 6.3.2.3). Where mean and spread come from the values
before, each value's Student's t is turned into its normal score: independent standard normal values while nothing
changes (C. P. Quesenberry's Q-statistics, J. Quality Technology 23, 213 (1991), and "On properties of Q charts for
variables", Mimeo series 2252, 1993).
"""

from __future__ import annotations

from math import copysign, exp, log, log1p, sqrt

OVERSHOOT = 1.166  # D. Siegmund, Sequential Analysis (1985): the mean overshoot, twice 0.583


def normal_score(t: float, freedom: float) -> float:
    """Standard normal value with the tail of Student's t (D. L. Wallace, Ann. Math. Stat. 30, 1124 (1959))."""
    size = sqrt(freedom * log1p(t * t / freedom))
    return copysign(size * (8 * freedom + 1) / (8 * freedom + 3), t)


def run_length(limit: float, allowance: float) -> float:
    """Mean number of values until a two-sided cusum signals although nothing has changed (Siegmund 1985)."""
    b = 2 * allowance * (limit + OVERSHOOT)
    return (exp(b) - b - 1) / (4 * allowance**2)


def decision_limit(false_alarm_rate: float, allowance: float) -> float:
    """Limit h at which a two-sided cusum signals falsely so often a value, by the inverse of `run_length`."""
    wanted = 4 * allowance**2 / false_alarm_rate
    b = log(wanted + 1)
    for _ in range(20):
        b = log(wanted + 1 + b)
    return b / (2 * allowance) - OVERSHOOT


class Cusum:
    """Two one-sided sums; values beyond `cap` count as `cap`, so that one stray value is no shift."""

    def __init__(self, allowance: float, limit: float, cap: float = 3.0) -> None:
        self._allowance, self._limit, self._cap = allowance, limit, cap
        self.high = self.low = 0.0

    def add(self, value: float) -> int:
        """One more standardised value; 1 or -1 where the mean has shifted up or down, 0 otherwise."""
        value = max(-self._cap, min(self._cap, value))
        self.high = max(0.0, self.high + value - self._allowance)
        self.low = max(0.0, self.low - value - self._allowance)
        return int(self.high > self._limit) - int(self.low > self._limit)

    def restart(self) -> None:
        """Forget what has been added up."""
        self.high = self.low = 0.0
