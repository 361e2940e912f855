"""Uncertainty from observations (type A): repeats in one place, revisits over a scan with its drift, visits of repeats.

Section numbers are those of JCGM 100:2008.
"""

from __future__ import annotations

from dataclasses import dataclass
from math import sqrt

import numpy as np
from numpy.typing import NDArray

from checks.errors import MeasurementError
from checks.uncertainty import Input

Vector = NDArray[np.float64]


@dataclass(frozen=True)
class Repeats:
    """Mean of n observations, their experimental standard deviation, and the degrees of freedom of that."""

    mean: float
    deviation: float
    count: int
    degrees_of_freedom: int

    @property
    def standard_uncertainty(self) -> float:
        """Of the mean (4.2.3)."""
        return self.deviation / sqrt(self.count)

    def as_input(self) -> Input:
        """The mean as an input of a budget."""
        return Input(self.mean, self.standard_uncertainty, "normal", self.degrees_of_freedom)


def from_repeats(values: Vector) -> Repeats:
    """Of independent repeats, shape (n,) (4.2.1 to 4.2.3).

    Raises:
        MeasurementError: fewer than two, or not finite.
    """
    x = _enough(values, 2)
    return Repeats(float(x.mean()), float(x.std(ddof=1)), x.size, x.size - 1)


@dataclass(frozen=True)
class Revisits:
    """Revisits of one pose over a scan: the scatter about a straight line through them, and the line.

    Attributes:
        middle, middle_u: value in the middle of the visits, with its standard uncertainty.
        drift, drift_u: slope per unit of the places, with its standard uncertainty.
        deviation: of one visit about the line, with `degrees_of_freedom`.
    """

    middle: float
    middle_u: float
    drift: float
    drift_u: float
    deviation: float
    degrees_of_freedom: int


def from_revisits(values: Vector, places: Vector) -> Revisits:
    """Least squares of a straight line, each of shape (n,); places are times, or numbers in the order (H.3).

    Raises:
        MeasurementError: fewer than three, not finite, or all at one place.
    """
    y, x = _enough(values, 3), np.asarray(places, np.float64)
    if x.shape != y.shape or not np.ptp(x) > 0:
        raise MeasurementError("revisits: give a place in time or order for each, not all the same")
    away = x - x.mean()
    square = float(away @ away)
    slope = float(away @ y) / square
    residual = y - y.mean() - slope * away
    freedom = y.size - 2
    deviation = sqrt(float(residual @ residual) / freedom)
    return Revisits(float(y.mean()), deviation / sqrt(y.size), slope, deviation / sqrt(square), deviation, freedom)


@dataclass(frozen=True)
class Visits:
    """Analysis of variance of J visits with K repeats each.

    Attributes:
        ratio: F, variance between the visits over what the repeats within them explain; near 1: no more than that.
        chance: probability of so large a ratio if the visits added nothing.
        within, within_freedom: standard deviation of one repeat within a visit.
        between: standard deviation that coming back adds, over and above the repeats; 0 where none is seen.
    """

    overall: Repeats
    ratio: float
    chance: float
    within: float
    within_freedom: int
    between: float


def from_visits(values: Vector) -> Visits:
    """Of repeats within visits, shape (J, K): the mean of the visits is what has an uncertainty (H.5.2).

    Raises:
        MeasurementError: fewer than two visits or repeats, or not finite.
    """
    from scipy.stats import f

    x = np.asarray(values, np.float64)
    if x.ndim != 2 or min(x.shape) < 2 or not np.isfinite(x).all():
        raise MeasurementError("visits: give two or more, each with as many finite repeats, two or more")
    visits, repeats = x.shape
    overall = from_repeats(x.mean(axis=1))
    freedom = visits * (repeats - 1)
    within2 = float(np.sum((x - x.mean(axis=1, keepdims=True)) ** 2)) / freedom
    between2 = overall.deviation**2 - within2 / repeats
    ratio = repeats * overall.deviation**2 / within2 if within2 > 0 else float("inf")
    chance = float(f.sf(ratio, visits - 1, freedom))
    return Visits(overall, ratio, chance, sqrt(within2), freedom, sqrt(max(between2, 0.0)))


def _enough(values: Vector, fewest: int) -> Vector:
    x = np.asarray(values, np.float64)
    if x.ndim != 1 or x.size < fewest or not np.isfinite(x).all():
        raise MeasurementError(f"observations: give {fewest} or more finite numbers in a row")
    return x
