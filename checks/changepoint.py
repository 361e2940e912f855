"""Where a lasting step may have begun in values that a linear model explains, and how large it is.

The likelihood ratio over candidate beginnings: for each of them the step is one more column, 0 before and 1 after,
and least squares follows from sums alone. The candidates lie densely in the recent past and thinly in the distant:
eight at each distance of 1, 2, 4, ... values, so that memory and cost do not grow. For one candidate the step over
its standard deviation is exactly Student's t (partial regression, e.g. Draper and Smith, Applied Regression Analysis).
"""

from __future__ import annotations

from dataclasses import dataclass
from math import inf, sqrt

import numpy as np

from checks.recursion import Recursion, Vector

LEVELS, KEPT = 14, 8
FEWEST_AFTER = 3


@dataclass
class Tail:
    """Sums over the values since a step began.

    Attributes:
        column: shape (J,), weighted sum of the rows, the first entry of each row being 1.
        moment: weighted sum of the values. points: how many. first: the order of the first of them.
    """

    column: Vector
    moment: float
    points: int
    first: int

    def add(self, row: Vector, value: float, weight: float) -> None:
        """Take one more value."""
        self.column += weight * row
        self.moment += weight * value
        self.points += 1


class ChangePoints:
    """Candidates for the beginning of a step; `coefficients` is J, the length of the model's rows."""

    def __init__(self, coefficients: int) -> None:
        self._total = Tail(np.zeros(coefficients), 0.0, 0, 0)
        self._column = np.zeros((LEVELS, KEPT, coefficients))
        self._moment = np.zeros((LEVELS, KEPT))
        self._points = np.full((LEVELS, KEPT), -1, np.int64)
        self._first = np.zeros((LEVELS, KEPT), np.int64)

    def add(self, row: Vector, value: float, weight: float, order: int) -> None:
        """Take one more value; that a step begins with it is a new candidate."""
        total = self._total
        level = 0
        while level < LEVELS and total.points % (1 << level) == 0:
            slot = level, (total.points >> level) % KEPT
            self._column[slot], self._moment[slot] = total.column, total.moment
            self._points[slot], self._first[slot] = total.points, order
            level += 1
        total.add(row, value, weight)

    def likeliest(self, known: Recursion) -> tuple[float, Tail] | None:
        """Student's t of the likeliest step, with one degree of freedom less than `known`, and its tail.

        `known` is the fit of all values without this step; None where no candidate can be told from the model.
        """
        total = self._total
        column, moment = total.column - self._column, total.moment - self._moment
        after = total.points - self._points
        weight = column[..., 0]
        left = weight - ((column @ known.inverse) * column).sum(axis=-1)
        fair = (self._points >= 0) & (after >= FEWEST_AFTER) & (left > 1e-6 * weight)
        if not fair.any() or known.freedom < 2:
            return None
        apart = moment - column @ known.coefficients
        gain = np.where(fair, apart**2 / np.where(fair, left, 1.0), 0.0)
        i = np.unravel_index(int(np.argmax(gain)), gain.shape)
        rest = known.square - float(gain[i])
        t = sqrt(float(gain[i]) * (known.freedom - 1) / rest) if rest > 0 else inf
        return t, Tail(column[i].copy(), float(moment[i]), int(after[i]), int(self._first[i]))
