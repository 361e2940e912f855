"""Least squares one value at a time, and how far each new value lies from what the ones before it expect.

Recursive residuals (R. L. Brown, J. Durbin, J. M. Evans, J. Royal Stat. Soc. B 37, 149 (1975)): each new value less
its expectation, over the standard deviation of that difference, is independent of all the others while the model
holds. Over the standard deviation found so far it is Student's t.
"""

from __future__ import annotations

from dataclasses import dataclass
from math import sqrt

import numpy as np
from numpy.typing import NDArray

Vector = NDArray[np.float64]


@dataclass
class Recursion:
    """State of a linear fit of J coefficients.

    Attributes:
        coefficients: shape (J,). inverse: shape (J, J), inverse of the normal matrix, weights in it.
        square: weighted sum of squared residuals. freedom: its degrees of freedom, 1 or more.
    """

    coefficients: Vector
    inverse: Vector
    square: float
    freedom: int

    def apart(self, row: Vector, value: float, variance: float) -> tuple[float, float]:
        """A value less its expectation, and the standard deviation of that; it is not added yet.

        `row` has shape (J,), `variance` is that of the value as stated; the residuals so far scale it.
        """
        ratio = variance + float(row @ self.inverse @ row)
        return value - float(row @ self.coefficients), sqrt(ratio * self.square / self.freedom)

    def add(self, row: Vector, value: float, variance: float) -> None:
        """Take one more value."""
        gain = self.inverse @ row
        ratio = variance + float(row @ gain)
        apart = value - float(row @ self.coefficients)
        self.coefficients = self.coefficients + gain * (apart / ratio)
        self.inverse = self.inverse - gain[:, None] * (gain / ratio)
        self.square += apart * apart / ratio
        self.freedom += 1
