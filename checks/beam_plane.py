"""A beam in a plane across it: area within a level, centroid, ellipticity and orientation, integral over the plane.

The beam area is that of all points whose pulse-pressure-squared integral is above a fraction of the largest in the
plane (IEC 61828, IEC 62127-1; definition from memory); -6 dB is 0.2512 of it. Shapes are of that area.
"""

from __future__ import annotations

from dataclasses import dataclass
from math import pi, sqrt

import numpy as np
from numpy.typing import NDArray

from checks.beam import peak_of
from checks.errors import MeasurementError

Vector = NDArray[np.float64]
FEWEST = 5
FINER = 8
DRAWS = 40


@dataclass(frozen=True)
class Shape:
    """The part of a plane above a level.

    Attributes:
        area_m2: of it. centroid_m: (x, y), weighted by the square of the amplitude.
        major_m, minor_m: full axes of the ellipse with the same second moments.
        orientation: of the major axis from x towards y, rad, above -pi/2 and up to pi/2.
    """

    area_m2: float
    centroid_m: tuple[float, float]
    major_m: float
    minor_m: float
    orientation: float

    @property
    def ellipticity(self) -> float:
        """Minor over major axis, at most 1."""
        return self.minor_m / self.major_m


@dataclass(frozen=True)
class Measured:
    """A shape with standard uncertainties, in the order and units of `Shape`."""

    shape: Shape
    area_u_m2: float
    centroid_u_m: tuple[float, float]
    major_u_m: float
    minor_u_m: float
    orientation_u: float
    ellipticity_u: float


def shape_of(x_m: Vector, y_m: Vector, amplitude: Vector, level_db: float = -6.0) -> Shape:
    """Shape above `level_db` re the top, from a grid: shapes (nx,), (ny,) and (ny, nx); splines between the points.

    Raises:
        MeasurementError: too few points, gaps, or an area that runs out of the plane.
    """
    x, y, fine = _fine(x_m, y_m, amplitude)
    level = float(_top(x, y, fine)) * 10 ** (level_db / 20)
    border = np.concatenate([fine[0], fine[-1], fine[:, 0], fine[:, -1]])
    if border.max() >= level:
        raise MeasurementError(f"the part above {level_db:g} dB runs out of the raster: a larger span, or shift it")
    weight = _inside(fine, level)
    cell = float(x[1] - x[0]) * float(y[1] - y[0])
    area = float(weight.sum()) * cell
    centroid = _mean(weight * fine**2, x, y)
    cx, cy = _mean(weight, x, y)
    total = weight.sum()
    xx = float(weight.sum(axis=0) @ (x - cx) ** 2 / total)
    yy = float(weight.sum(axis=1) @ (y - cy) ** 2 / total)
    xy = float((y - cy) @ weight @ (x - cx) / total)
    size, turn = np.linalg.eigh(np.array([[xx, xy], [xy, yy]]))
    axis = turn[:, 1] * (1 if (turn[0, 1], turn[1, 1]) > (0, 0) else -1)
    angle = float(np.arctan2(axis[1], axis[0]))
    angle = angle if angle > -pi / 2 + 1e-12 else angle + pi
    # an ellipse with semi-axis A has the second moment A²/4 along it
    return Shape(area, centroid, 4 * sqrt(float(size[1])), 4 * sqrt(max(float(size[0]), 0.0)), angle)


def _fine(x_m: Vector, y_m: Vector, amplitude: Vector) -> tuple[Vector, Vector, Vector]:
    """The plane on a grid that is `FINER` times as fine."""
    from scipy.interpolate import RectBivariateSpline

    if min(x_m.size, y_m.size) < FEWEST or amplitude.shape != (y_m.size, x_m.size):
        raise MeasurementError(f"a plane needs {FEWEST} points or more each way, and a value at each")
    if not np.isfinite(amplitude).all():
        raise MeasurementError("the plane has points without a value: finish the raster first")
    spline = RectBivariateSpline(y_m, x_m, amplitude)
    x = np.linspace(x_m[0], x_m[-1], FINER * (x_m.size - 1) + 1)
    y = np.linspace(y_m[0], y_m[-1], FINER * (y_m.size - 1) + 1)
    return x, y, np.asarray(spline(y, x))


def _top(x: Vector, y: Vector, fine: Vector) -> float:
    """The largest value, by a quadratic about the largest one on the grid."""
    i, j = np.unravel_index(int(np.argmax(fine)), fine.shape)
    rows = slice(max(0, int(i) - FINER // 2), int(i) + FINER // 2 + 1)
    columns = slice(max(0, int(j) - FINER // 2), int(j) + FINER // 2 + 1)
    gx, gy = np.meshgrid(x[columns], y[rows])
    try:
        return peak_of(gx.ravel(), gy.ravel(), fine[rows, columns].ravel()).amplitude
    except MeasurementError:
        return float(fine.max())


def _inside(fine: Vector, level: float) -> Vector:
    """Share of the cell about each point that is above the level, the plane taken as flat within the cell."""
    down, along = np.gradient(fine)
    return np.asarray(np.clip(0.5 + (fine - level) / np.maximum(np.abs(down) + np.abs(along), 1e-300), 0.0, 1.0))


def _mean(weight: Vector, x: Vector, y: Vector) -> tuple[float, float]:
    total = weight.sum()
    return float(weight.sum(axis=0) @ x / total), float(weight.sum(axis=1) @ y / total)


def measured_shape(
    x_m: Vector, y_m: Vector, amplitude: Vector, sigma: Vector, random: np.random.Generator, level_db: float = -6.0
) -> Measured:
    """Shape with its uncertainty: from noise `sigma`, shape (ny, nx), by draws, and from the steps of the grid.

    Of the steps: a fifteenth of what leaving out every other line changes, as for a rule of the fourth order.

    Raises:
        MeasurementError: as `shape_of`.
    """
    shape = shape_of(x_m, y_m, amplitude, level_db)
    noisy = []
    for _ in range(DRAWS):
        try:
            noisy.append(shape_of(x_m, y_m, amplitude + sigma * random.standard_normal(sigma.shape), level_db))
        except MeasurementError as error:
            raise MeasurementError("too much noise: the part above the level is not held by the raster") from error
    i, j = (int(v) % 2 for v in np.unravel_index(int(np.argmax(amplitude)), amplitude.shape))
    try:
        coarse = shape_of(x_m[j::2], y_m[i::2], amplitude[i::2, j::2], level_db)
    except MeasurementError:
        coarse = Shape(2 * shape.area_m2, shape.centroid_m, 2 * shape.major_m, 2 * shape.minor_m, shape.orientation)
    spread = np.std([_row(s, shape.orientation) for s in noisy], axis=0, ddof=1)
    steps = (_row(coarse, shape.orientation) - _row(shape, shape.orientation)) / 15
    u = np.hypot(spread, steps)
    return Measured(shape, float(u[0]), (float(u[1]), float(u[2])), *(float(v) for v in u[3:]))


def _row(s: Shape, about: float) -> Vector:
    turned = (s.orientation - about + pi / 2) % pi - pi / 2  # an axis has no sign
    return np.array([s.area_m2, *s.centroid_m, s.major_m, s.minor_m, turned, s.ellipticity])


def plane_integral(x_m: Vector, y_m: Vector, square: Vector, sigma: Vector) -> tuple[float, float]:
    """Integral of `square` (such as the pulse-pressure-squared integral) over the plane, and standard uncertainty.

    `square` and `sigma` have shape (ny, nx); by the trapezoidal rule, which is exact to rounding for a smooth beam that
    has died out at the border. The uncertainty is that of independent noise.

    Raises:
        MeasurementError: too few points or gaps.
    """
    if min(x_m.size, y_m.size) < 2 or square.shape != (y_m.size, x_m.size) or not np.isfinite(square).all():
        raise MeasurementError("an integral over a plane needs a value at each point of its grid, two or more each way")
    weight = np.outer(_trapezoid(y_m), _trapezoid(x_m))
    return float((weight * square).sum()), float(np.linalg.norm(weight * sigma))


def _trapezoid(x: Vector) -> Vector:
    step = np.diff(x)
    return np.asarray((np.append(step, 0.0) + np.append(0.0, step)) / 2)


def on_grid(x_m: Vector, y_m: Vector, value: Vector, step_m: float) -> tuple[Vector, Vector, Vector]:
    """Scattered points, each of shape (n,), on a grid of that step within their largest upright rectangle of reach.

    Grid points outside the points' hull are taken from the nearest of them. Cubic pieces over triangles.

    Raises:
        MeasurementError: too few points, or all on one line.
    """
    from scipy.interpolate import CloughTocher2DInterpolator, NearestNDInterpolator
    from scipy.spatial import QhullError

    if x_m.size < FEWEST**2 or not step_m > 0:
        raise MeasurementError(f"a plane of scattered points needs {FEWEST**2} or more, and a step above 0")
    places = np.stack([x_m, y_m], axis=1)
    try:
        smooth = CloughTocher2DInterpolator(places, value, rescale=True)
    except QhullError as error:
        raise MeasurementError("the points lie on one line: they make no plane") from error
    x = np.arange(x_m.min(), x_m.max() + step_m / 2, step_m)
    y = np.arange(y_m.min(), y_m.max() + step_m / 2, step_m)
    gx, gy = np.meshgrid(x, y)
    grid = np.asarray(smooth(gx, gy))
    return x, y, np.where(np.isfinite(grid), grid, NearestNDInterpolator(places, value)(gx, gy))
