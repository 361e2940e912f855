"""Temperature of the water at every point: a thermometer shows digits, the water is slow."""

from __future__ import annotations

import numpy as np
from numpy.polynomial.chebyshev import chebfit, chebval
from numpy.typing import NDArray

Vector = NDArray[np.float64]
DEGREE = 3
ROUNDING = 0.5  # of the last digit, rms: what a slow change may miss readings by that are only rounded
MOST_C = 0.003  # rms; a thermometer may scatter by a few digits
COARSEST_C = 0.1  # digit of a thermometer; a larger step is a change of the water


def smoothed(reading_c: Vector) -> Vector:
    """The readings in the order of the points, shape (n,), without their rounding.

    One digit of 1 mK moves the arrival over 100 mm by 0.14 ns, more than the arrivals of a good scan scatter. The
    simplest polynomial, up to a cubic, that misses the readings by no more than their rounding stands for them; where
    even the cubic misses them by more than a thermometer scatters, they are returned as they are.
    """
    steps = np.diff(np.unique(reading_c))
    if not steps.size:
        return reading_c
    digit = min(float(steps.min()), COARSEST_C)
    place = np.linspace(-1, 1, reading_c.size)
    smooth: Vector = reading_c
    for degree in range(min(DEGREE, reading_c.size - 1) + 1):
        smooth = np.asarray(chebval(place, chebfit(place, reading_c, degree)), np.float64)
        missed = float(np.sqrt(np.mean((smooth - reading_c) ** 2)))
        if missed <= ROUNDING * digit:
            return smooth
    return smooth if missed <= MOST_C else reading_c
