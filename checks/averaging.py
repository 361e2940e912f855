"""What averaging over the face of the element does to a beam: closed forms for a Gaussian one, and by integration.

p = p0 exp(-r²/w²) averaged over a centred disc of radius a is p0 (w²/a²)(1 - exp(-a²/w²)) (derived).
"""

from __future__ import annotations

from collections.abc import Callable
from math import exp, expm1, log, pi, sqrt

import numpy as np
from numpy.typing import NDArray

from checks.errors import MeasurementError

Vector = NDArray[np.float64]
LEVEL_6DB = 10**-0.3
RINGS, SPOKES = 12, 48

W6_TO_W = 1 / (2 * sqrt(0.3 * log(10)))  # w from the full -6 dB width


def averaged_share(radius_m: float, width6_m: float) -> float:
    """Share of the true peak that an element of that radius reads in a Gaussian beam of that -6 dB width."""
    s = (radius_m / (width6_m * W6_TO_W)) ** 2
    return -expm1(-s) / s if s > 1e-12 else 1.0


def true_width6(measured_width6_m: float, radius_m: float) -> float:
    """-6 dB width of the beam before averaging widened it, by second moments: w_m² = w² + a²/2."""
    w = measured_width6_m * W6_TO_W
    square = w**2 - radius_m**2 / 2
    return sqrt(max(square, (0.1 * w) ** 2)) / W6_TO_W


def largest_radius(width6_m: float, loss: float) -> float:
    """Largest radius (m) at which the peak is read low by no more than `loss` (as a share, 0.01 is 1 %)."""
    low, high = 0.0, 10.0
    for _ in range(80):  # bisection of a falling function of s = (a/w)^2
        middle = (low + high) / 2
        share = (1 - exp(-middle)) / middle if middle > 0 else 1.0
        low, high = (middle, high) if 1 - share < loss else (low, middle)
    return sqrt(low) * width6_m * W6_TO_W


def averaged(profile: Callable[[Vector], Vector], radius_m: float, at_m: Vector) -> Vector:
    """Mean over a disc of a beam that is the same all round its axis, shape of `at_m`, shape (n,).

    `profile` gives the amplitude at distances from the axis, any shape; the disc's centre stands at `at_m`. By
    Gauss's rule along its radius and evenly spaced spokes.
    """
    node, weight = np.polynomial.legendre.leggauss(RINGS)
    r = radius_m * (node + 1) / 2
    share = weight * r / np.sum(weight * r)
    spoke = (np.arange(SPOKES) + 0.5) * pi / SPOKES  # half of them: the other half is their mirror image
    x = at_m[:, None, None] + r[:, None] * np.cos(spoke)
    y = r[:, None] * np.sin(spoke)
    return np.asarray(np.einsum("nrs,r->n", profile(np.hypot(x, y)), share) / SPOKES)


def widened(radius_m: float, width6_m: float) -> float:
    """-6 dB width that an element of that radius measures of a Gaussian beam of that width, by integration.

    Raises:
        MeasurementError: a width or a radius that is none.
    """
    from scipy.optimize import brentq

    if not (width6_m > 0 and radius_m >= 0):
        raise MeasurementError(f"radius {radius_m:g} m and width {width6_m:g} m: give a width above 0, a radius from 0")
    if radius_m == 0:
        return width6_m
    w = width6_m * W6_TO_W

    def gaussian(r: Vector) -> Vector:
        return np.asarray(np.exp(-((r / w) ** 2)))

    top = float(averaged(gaussian, radius_m, np.zeros(1))[0])

    def over(at: float) -> float:
        return float(averaged(gaussian, radius_m, np.array([at]))[0]) / top - LEVEL_6DB

    return 2 * float(brentq(over, 0.0, width6_m + 2 * radius_m, xtol=1e-9 * width6_m))


def radius_by_criterion(wavelength_m: float, source_radius_m: float, distance_m: float) -> float:
    """Largest radius, m, that the criterion of IEC 62127-1 lets pass: lambda/(8 a1) sqrt(l² + a1²).

    l is the distance, a1 the radius of the source, or half its largest dimension where it is focused or not round.
    The form is from memory; to first order it says that paths from the rim of the source to the two ends of the
    element differ by a quarter of a wavelength (derived). It lets 3.8 % of the peak be lost, not 1 %.

    Raises:
        MeasurementError: lengths that are none.
    """
    if not min(wavelength_m, source_radius_m, distance_m) > 0:
        raise MeasurementError("the criterion needs a wavelength, a source radius and a distance above 0")
    return wavelength_m / (8 * source_radius_m) * sqrt(distance_m**2 + source_radius_m**2)
