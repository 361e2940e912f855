"""A beam along its axis: focal distance and depth from an axial line, axis and tilt from peaks in several planes."""

from __future__ import annotations

from dataclasses import dataclass
from math import atan, hypot, sqrt

import numpy as np
from numpy.typing import NDArray

from checks.beam import steps_u, width_of
from checks.errors import MeasurementError

Vector = NDArray[np.float64]
TOP_DB = 3.0


@dataclass(frozen=True)
class Focus:
    """Where the level along the axis is largest, and how far it stays within -6 dB of that.

    Attributes:
        distance_m: from the source face to the largest pulse-pressure-squared integral; standard uncertainty.
        depth_m: distance between the -6 dB points before and behind it; standard uncertainty.
        near_m, far_m: these points.
    """

    distance_m: float
    distance_u_m: float
    depth_m: float
    depth_u_m: float
    near_m: float
    far_m: float


def focus_of(z_m: Vector, amplitude: Vector, sigma: Vector) -> Focus:
    """Focus from a line along the axis; all of shape (n,), `amplitude` the root of the integral, or a peak pressure.

    Focal distance and depth as IEC 61828 uses the words (from memory).

    Raises:
        MeasurementError: too few points, or no fall to -6 dB on both sides.
    """
    up = np.argsort(z_m)
    z, a, s = z_m[up], amplitude[up], sigma[up]
    whole = width_of(z, a, s)
    steps = steps_u(z, a, s, whole)
    if steps is None:
        steps = float(np.median(np.diff(z))) / sqrt(12)
    distance, distance_u = _top(z, a, s, whole.peak_m)
    depth_u = hypot(whole.standard_uncertainty_m, steps)
    return Focus(distance, distance_u, whole.width_m, depth_u, whole.left_m, whole.right_m)


def _top(z: Vector, a: Vector, s: Vector, near: float) -> tuple[float, float]:
    """Place of the top and its standard uncertainty, by a polynomial through the points less than `TOP_DB` below it.

    Of the fourth order, or of the second where there are few points; half way to the one an order lower is doubt.
    """
    low = np.nonzero(a < a.max() * 10 ** (-TOP_DB / 20))[0]
    top = int(np.argmax(a))
    first, last = low[low < top].max(initial=-1) + 1, low[low > top].min(initial=z.size)
    rows = slice(max(0, min(first, top - 2)), max(last, top + 3))
    x, y, u = z[rows] - near, a[rows] / a.max(), np.maximum(s[rows] / a.max(), 1e-9)
    scale = float(np.ptp(x)) / 2
    orders = (4, 3) if x.size >= 2 * 4 + 1 else (2, 2)
    found = [_top_of(x / scale, y, u, order) for order in orders]
    (place, place_u), (other, _) = found
    if not abs(place) < 1:
        place, place_u = 0.0, 0.5
    doubt = abs(place - other) / sqrt(12) if abs(other) < 1 else 0.0
    return near + place * scale, hypot(place_u, doubt) * scale


def _top_of(x: Vector, y: Vector, u: Vector, order: int) -> tuple[float, float]:
    model = np.polynomial.polynomial.polyvander(x, order)
    covariance = np.linalg.pinv((model / u[:, None]).T @ (model / u[:, None]))
    solution = covariance @ (model.T @ (y / u**2))
    residual = (model @ solution - y) / u
    wider = max(1.0, float(residual @ residual) / max(1, x.size - order - 1))
    slope = np.polynomial.Polynomial(solution).deriv()
    level = np.linspace(-1, 1, 401)
    place = float(level[np.argmax(np.polynomial.Polynomial(solution)(level))])
    for _ in range(4):  # Newton's steps to where the slope is nothing
        place -= float(slope(place) / slope.deriv()(place))
    powers = np.arange(order + 1)
    gradient = np.append(0.0, powers[1:] * place ** (powers[1:] - 1.0)) / float(slope.deriv()(place))
    return place, sqrt(wider * float(gradient @ covariance @ gradient))


@dataclass(frozen=True)
class Axis:
    """The straight line through the peaks of several planes, against the z axis.

    Attributes:
        x_m, y_m: where it passes z = 0, with standard uncertainties.
        tilt_x, tilt_y: towards x and y, rad, with standard uncertainties.
        reduced_chi2: of the peaks about the line; far above 1: no straight line, or peaks worse than they say.
    """

    x_m: float
    y_m: float
    tilt_x: float
    tilt_y: float
    x_u_m: float
    y_u_m: float
    tilt_x_u: float
    tilt_y_u: float
    reduced_chi2: float

    @property
    def tilt(self) -> float:
        """Angle between the beam and the z axis, rad."""
        return atan(hypot(np.tan(self.tilt_x), np.tan(self.tilt_y)))


def axis_of(z_m: Vector, x_m: Vector, y_m: Vector, x_u_m: Vector, y_u_m: Vector) -> Axis:
    """Axis through peaks (x, y) found at distances z, all of shape (n,), by weighted least squares.

    The uncertainties are enlarged where the peaks scatter more than they say.

    Raises:
        MeasurementError: fewer than three planes, or all at one distance.
    """
    if z_m.size < 3 or not np.ptp(z_m) > 0:
        raise MeasurementError("a beam axis needs the peaks of three planes or more at different distances")
    lines = [_line(z_m, v, u) for v, u in ((x_m, x_u_m), (y_m, y_u_m))]
    chi2 = sum(line[3] for line in lines) / (2 * (z_m.size - 2))
    wider = sqrt(max(1.0, chi2))
    (x0, mx, cx, _), (y0, my, cy, _) = lines
    # the slope is the tangent of the tilt
    tilt_x_u, tilt_y_u = (wider * sqrt(float(c[1, 1])) / (1 + m * m) for c, m in ((cx, mx), (cy, my)))
    x_u, y_u = (wider * sqrt(float(c[0, 0])) for c in (cx, cy))
    return Axis(x0, y0, atan(mx), atan(my), x_u, y_u, tilt_x_u, tilt_y_u, chi2)


def _line(z: Vector, v: Vector, u: Vector) -> tuple[float, float, Vector, float]:
    """Value at z = 0, slope, covariance (2, 2), and chi-squared."""
    if not (u > 0).all():
        raise MeasurementError("a beam axis needs a standard uncertainty above 0 for each peak")
    model = np.stack([np.ones_like(z), z], axis=1) / u[:, None]
    solution, *_ = np.linalg.lstsq(model, v / u, rcond=None)
    residual = v / u - model @ solution
    covariance = np.asarray(np.linalg.inv(model.T @ model), np.float64)
    return float(solution[0]), float(solution[1]), covariance, float(residual @ residual)
