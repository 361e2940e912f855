"""Widths and peak of a beam, from levels along a line or over a plane."""

from __future__ import annotations

from dataclasses import dataclass
from typing import Any

import numpy as np
from numpy.typing import NDArray

from checks.errors import MeasurementError

Vector = NDArray[np.float64]
FEWEST = 5


@dataclass(frozen=True)
class Width:
    """-6 dB width of a profile: edges and width in metres, with the standard uncertainty of the width."""

    left_m: float
    right_m: float
    peak_m: float
    standard_uncertainty_m: float

    @property
    def width_m(self) -> float:
        """Distance between the edges."""
        return self.right_m - self.left_m


def width_of(position_m: Vector, amplitude: Vector, sigma: Vector, level_db: float = -6.0) -> Width:
    """Width between the points beside the peak where the amplitude has fallen to `level_db`.

    `amplitude` is the root of the pulse-pressure-squared integral, on which IEC 61828 defines the beamwidth
    (definition seen quoted), or a peak pressure; shape (n,), as `position_m` and the standard uncertainty `sigma`.
    A cubic spline carries the level between the points.

    Raises:
        MeasurementError: the profile does not fall to the level on both sides, or has too few points.
    """
    from scipy.interpolate import CubicSpline

    if position_m.size < FEWEST:
        raise MeasurementError(f"a width needs {FEWEST} points or more along the line; {position_m.size} were given")
    up = np.argsort(position_m)
    x, y, s = position_m[up], amplitude[up], sigma[up]
    curve = CubicSpline(x, y)
    fine = np.linspace(x[0], x[-1], 64 * x.size)
    values = curve(fine)
    top = int(np.argmax(values))
    peak = _refined_top(curve, float(fine[top]), x)
    wanted = float(curve(peak)) * 10 ** (level_db / 20)
    below = values < wanted
    left_side, right_side = np.nonzero(below[:top])[0], np.nonzero(below[top:])[0]
    if not left_side.size or not right_side.size:
        raise MeasurementError(f"the profile does not fall to {level_db:g} dB on both sides of its peak: a longer span")
    left = _root(curve, wanted, float(fine[left_side[-1]]), float(fine[left_side[-1] + 1]))
    right = _root(curve, wanted, float(fine[top + right_side[0] - 1]), float(fine[top + right_side[0]]))
    slope = curve.derivative()
    variance = sum((_sigma_at(x, s, edge) / max(abs(float(slope(edge))), 1e-30)) ** 2 for edge in (left, right))
    # the level itself leans on the peak, and moves both edges outwards or inwards together
    from_peak = _sigma_at(x, s, peak) * 10 ** (level_db / 20)
    common = sum(from_peak / max(abs(float(slope(edge))), 1e-30) for edge in (left, right))
    return Width(left, right, peak, float(np.sqrt(variance + common**2)))


def steps_u(position_m: Vector, amplitude: Vector, sigma: Vector, width: Width) -> float | None:
    """What the steps of a line leave open of its width, m, as standard uncertainty; the points in ascending order.

    A fifteenth of what leaving out every other point changes, as for a rule of the fourth order; None where too little
    is left of the line for a width.
    """
    start = int(np.argmax(amplitude)) % 2
    try:
        coarse = width_of(position_m[start::2], amplitude[start::2], sigma[start::2])
    except MeasurementError:
        return None
    return abs(coarse.width_m - width.width_m) / 15


def _refined_top(curve: Any, near: float, x: Vector) -> float:
    from scipy.optimize import minimize_scalar

    step = float(np.median(np.diff(x)))
    bounds = (max(float(x[0]), near - step), min(float(x[-1]), near + step))
    found = minimize_scalar(lambda at: -float(curve(at)), bounds=bounds, method="bounded")
    return float(found.x)


def _root(curve: Any, wanted: float, a: float, b: float) -> float:
    from scipy.optimize import brentq

    return float(brentq(lambda at: float(curve(at)) - wanted, a, b))


def _sigma_at(x: Vector, sigma: Vector, at: float) -> float:
    return float(np.interp(at, x, sigma))


@dataclass(frozen=True)
class Peak:
    """Place of the largest level: metres, with standard uncertainties, and the amplitude there."""

    x_m: float
    y_m: float
    x_u_m: float
    y_u_m: float
    amplitude: float


def peak_of(x_m: Vector, y_m: Vector, amplitude: Vector, down_db: float = 4.0) -> Peak:
    """Peak of a map from points near it, by a quadratic of the level in dB (a Gaussian top).

    All arrays have shape (n,), any order, no grid needed. Points less than `down_db` below the largest take part.

    Raises:
        MeasurementError: too few points near the peak, or no top among them.
    """
    level = 20 * np.log10(np.maximum(amplitude, 1e-300) / amplitude.max())
    rows = level > -down_db
    if rows.sum() < 7:
        rows = np.argsort(level)[-9:] if level.size >= 9 else rows
    if np.count_nonzero(rows) < 7 and np.size(rows) == level.size:
        raise MeasurementError("too few points near the peak to say where it is: smaller steps")
    x0, y0 = float(x_m[np.argmax(level)]), float(y_m[np.argmax(level)])
    scale = max(float(np.ptp(x_m[rows])), float(np.ptp(y_m[rows])), 1e-12)
    x, y, z = (x_m[rows] - x0) / scale, (y_m[rows] - y0) / scale, level[rows]
    model = np.stack([np.ones_like(x), x, y, x * x, x * y, y * y], axis=1)
    solution, *_ = np.linalg.lstsq(model, z, rcond=None)
    _, bx, by, cxx, cxy, cyy = solution
    curvature = np.array([[2 * cxx, cxy], [cxy, 2 * cyy]])
    if not (np.linalg.eigvalsh(curvature) < 0).all():
        raise MeasurementError("the map has no single top: check that the raster holds the beam's peak")
    turn = -np.linalg.inv(curvature)
    at = turn @ np.array([bx, by])
    if not (x.min() <= at[0] <= x.max() and y.min() <= at[1] <= y.max()):
        raise MeasurementError("the map rises up to its border: shift the raster so that it holds the beam's peak")
    residual = z - model @ solution
    freedom = max(1, z.size - 6)
    covariance = np.linalg.pinv(model.T @ model)[1:3, 1:3] * float(residual @ residual) / freedom
    spread = np.sqrt(np.maximum(np.diag(turn @ covariance @ turn.T), 0.0)) * scale
    top_db = float(solution @ np.array([1, at[0], at[1], at[0] ** 2, at[0] * at[1], at[1] ** 2]))
    return Peak(
        x_m=x0 + float(at[0]) * scale,
        y_m=y0 + float(at[1]) * scale,
        x_u_m=float(spread[0]),
        y_u_m=float(spread[1]),
        amplitude=float(amplitude.max()) * 10 ** (top_db / 20),
    )
