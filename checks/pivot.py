"""The pivot offset from arrival against angle.

Element centre at (ex, ez) from the axis of rotation at angle zero; a plane wave along z then arrives at

    t(theta) = t0 + (ez (cos theta - 1) - ex sin theta) / c + d n

with d a slow drift along the order of visiting n (never the clock: a replay must agree). Linear least squares; the
covariance is scaled by the observed residuals where they exceed the stated noise. A wave that is bent with radius R
arrives later by X²/(2 R c) beside the place where the element stood at angle zero, X = ex (cos - 1) + ez sin; that
is put right afterwards. Derived here. Where the element has moved during the scan, a step is one more column: 0
before, 1 after.
"""

from __future__ import annotations

from collections.abc import Callable
from dataclasses import dataclass, field
from math import inf

import numpy as np
from numpy.typing import NDArray

from checks.changepoint import Tail
from checks.recursion import Recursion

Vector = NDArray[np.float64]
TIMING_FLOOR_S = 2e-11  # trigger jitter and sampling clock leave at least this much
COLUMNS = 4
WORST_CONDITION = 1e12
BEND_U = 0.25  # relative, of what the bent wave takes and gives


@dataclass(frozen=True)
class PivotEstimate:
    """Pivot offset in metres with its covariance, shape (2, 2), order (x, z).

    Attributes:
        residual_sd_s: standard deviation of the arrivals about the fit.
        step_s, step_u_s: the step and its standard uncertainty, None and 0 where none is in the model.
        coefficients, coefficient_covariance: shapes (J,) and (J, J), of the plain linear fit, before the
            curvature of the wave is put in; in the order of `PivotFit.row`, and then the step.
        order_scale: points planned, as in `PivotFit`.
    """

    x_m: float
    z_m: float
    covariance: Vector
    residual_sd_s: float
    arrival_s: float
    drift_s: float
    points: int
    coefficients: Vector
    coefficient_covariance: Vector
    order_scale: int
    step_s: float | None = None
    step_u_s: float = 0.0

    @property
    def freedom(self) -> int:
        """Degrees of freedom of the residuals."""
        return self.points - int(self.coefficients.size)

    def expected(self, row: Vector) -> tuple[float, float]:
        """Arrival that the linear fit expects for one row of the model, and its standard deviation there, s.

        Where a step is in the model, it is expected after that step.
        """
        size = self.coefficients.size
        row = row[:size] if self.step_s is None else np.append(row[: size - 1], 1.0)
        shift = self.arrival_s - float(self.coefficients[0])
        spread = float(row @ self.coefficient_covariance @ row) + self.residual_sd_s**2
        return shift + float(row @ self.coefficients), float(np.sqrt(spread))

    def place(self, order: NDArray[np.intp]) -> Vector:
        """The drift's column for places in the order of visiting, shape of `order`."""
        return np.asarray(order / max(self.order_scale, 1) - 0.5)

    def arrival_at(self, theta: Vector, speed_m_s: float) -> Vector:
        """Arrival relative to that at angle zero, seconds, shape of `theta`."""
        return np.asarray((self.z_m * (np.cos(theta) - 1) - self.x_m * np.sin(theta)) / speed_m_s)


def variance_of(sigma_s: float) -> float:
    """Variance of an arrival with that standard uncertainty, s²."""
    return sigma_s**2 + TIMING_FLOOR_S**2


@dataclass
class PivotFit:
    """Normal equations, one point at a time; memory and cost per point do not grow.

    `order_scale` is the number of points planned; it only scales the drift column. `taken_s` is what earlier steps
    have moved the arrivals by, taken off those that come. What is not known of the model: `scale_u`, relative to the
    whole offset, and `face_u_m`, of what the face hears of a bent wave, which looks like z.
    """

    speed_m_s: float
    wave_radius_m: float
    order_scale: int
    normal: Vector = field(default_factory=lambda: np.zeros((COLUMNS, COLUMNS)))
    moment: Vector = field(default_factory=lambda: np.zeros(COLUMNS))
    square: float = 0.0
    weight: float = 0.0
    points: int = 0
    after: Tail | None = None
    origin_s: float = 0.0
    taken_s: float = 0.0
    scale_u: float = 0.0
    face_u_m: float = 0.0

    def row(self, theta: float, order: int) -> Vector:
        """Row of the model: constant, ex, ez, drift."""
        c = self.speed_m_s
        return np.array([1.0, -np.sin(theta) / c, (np.cos(theta) - 1) / c, order / max(self.order_scale, 1) - 0.5])

    def add(self, theta: float, arrival_s: float, sigma_s: float, order: int) -> None:
        """Take one arrival with its standard uncertainty."""
        if not self.points:
            self.origin_s = arrival_s
        weight = 1.0 / variance_of(sigma_s)
        row = self.row(theta, order)
        value = self.value(arrival_s)
        self.normal += weight * np.outer(row, row)
        self.moment += weight * value * row
        self.square += weight * value**2
        self.weight += weight
        self.points += 1
        if self.after is not None:
            self.after.add(row, value, weight)

    def step(self, after: Tail) -> None:
        """Put a step into the model, over the arrivals in `after`; these may be none yet.

        A step that is in the model already is taken off as it is estimated now; `after` lies within its arrivals.
        """
        estimate, earlier = self.estimate(), self.after
        step = None if estimate is None else estimate.step_s
        if earlier is not None and step is not None:
            self.square += step * (step * float(earlier.column[0]) - 2 * earlier.moment)
            self.moment -= step * earlier.column
            self.taken_s += step
            after.moment -= step * float(after.column[0])
        self.after = after

    def recursion(self) -> Recursion | None:
        """The linear fit so far, to be continued one arrival at a time; None while nothing is determined."""
        return self._solved(COLUMNS)

    def value(self, arrival_s: float) -> float:
        """An arrival as the linear fit takes it."""
        return arrival_s - self.origin_s - self.taken_s

    def extended(self, theta: float, order: int) -> Vector:
        """Row of the model after the step, where there is one."""
        row = self.row(theta, order)
        return row if self.after is None else np.append(row, 1.0)

    def _solved(self, kept: int) -> Recursion | None:
        if self.points < kept + 2:
            return None
        normal, moment = self._equations(kept)
        freedom = self.points - moment.size
        scale = np.sqrt(np.diag(normal))
        if freedom < 1 or (scale <= 0).any():
            return None
        values, vectors = np.linalg.eigh(normal / np.outer(scale, scale))
        if values[0] < values[-1] / WORST_CONDITION:
            return None
        vectors = vectors / scale[:, None]
        inverse = (vectors / values) @ vectors.T
        solution = inverse @ moment
        return Recursion(solution, inverse, max(0.0, self.square - float(solution @ moment)), freedom)

    def estimate(self, drift: bool = True) -> PivotEstimate | None:
        """The fit so far, or None while the angles do not determine it."""
        solved = self._solved(COLUMNS if drift else COLUMNS - 1)
        if solved is None:
            return None
        solution, chi2, freedom = solved.coefficients, solved.square, solved.freedom
        covariance = solved.inverse * max(1.0, chi2 / freedom)
        _, x, z = solution[:3]
        bend = self._bend(float(x), float(z))
        x, z = x + bend[0], z + bend[1]
        model = (BEND_U * bend) ** 2 + self.scale_u**2 * (x**2 + z**2) + np.array([0.0, self.face_u_m**2])
        return PivotEstimate(
            x_m=float(x),
            z_m=float(z),
            covariance=covariance[1:3, 1:3] + np.diag(model),
            residual_sd_s=float(np.sqrt(chi2 / self.weight * self.points / freedom)),
            arrival_s=float(solution[0]) + self.origin_s,
            drift_s=float(solution[3]) if drift else 0.0,
            points=self.points,
            coefficients=solution,
            coefficient_covariance=covariance,
            order_scale=self.order_scale,
            step_s=None if self.after is None else float(solution[-1]),
            step_u_s=0.0 if self.after is None else float(np.sqrt(covariance[-1, -1])),
        )

    def _bend(self, x: float, z: float) -> Vector:
        """What the bent wave takes from the offset of a linear fit, shape (2,), m.

        With u = 1 - cos, X² is z² (2 u - u²) + x² u² - 2 x z u sin. Projected on the columns, for angles spread
        evenly, u² counts as 2.57 <u> u, and u sin as 1.8 <u> sin (leading order, derived).
        """
        u = -self.speed_m_s * float(self.normal[0, 2]) / float(self.normal[0, 0])
        return np.array([-1.8 * u * x * z, (1 - 1.29 * u) * z * z + 1.29 * u * x * x]) / self.wave_radius_m

    def _equations(self, kept: int) -> tuple[Vector, Vector]:
        """Normal matrix and moments, the step as a last column where there is one: its row is the constant's."""
        normal, moment = self.normal[:kept, :kept], self.moment[:kept]
        if self.after is None:
            return normal, moment
        column = self.after.column[:kept, None]
        return np.block([[normal, column], [column.T, column[:1]]]), np.append(moment, self.after.moment)


Late = Callable[[float, float], Vector]  # (x, z) in m to what comes later than a plane wave's path, s, shape (n,)
ROUNDS = 4


def fit_pivot(
    theta: Vector,
    arrival_s: Vector,
    sigma_s: Vector,
    order: NDArray[np.intp],
    speed_m_s: float,
    late: Late | None = None,
) -> PivotEstimate | None:
    """All points at once; those far off (over five standard deviations) are left out once.

    All arrays have shape (n,): angles in rad, arrivals and their standard uncertainties in s, place in the order
    of visiting. `late` is what a real wave adds to the arrival of a plane one for an offset (x, z); it is put right by
    repeating the linear fit. The covariance is that of the arrivals alone. None is returned where the angles do not
    determine the offset.
    """
    kept = np.ones(theta.size, np.bool_)
    found = _repeated(theta, arrival_s, sigma_s, order, speed_m_s, late, kept)
    if found is None:
        return None
    estimate, residual = found
    off = np.abs(residual)
    spread = 1.4826 * float(np.median(off))
    kept = off <= 5 * np.maximum(spread, np.hypot(sigma_s, TIMING_FLOOR_S))
    if kept.all():
        return estimate
    again = _repeated(theta, arrival_s, sigma_s, order, speed_m_s, late, kept)
    return again[0] if again else estimate


def _repeated(
    theta: Vector,
    arrival_s: Vector,
    sigma_s: Vector,
    order: NDArray[np.intp],
    speed_m_s: float,
    late: Late | None,
    kept: NDArray[np.bool_],
) -> tuple[PivotEstimate, Vector] | None:
    """The fit to the points that are kept, and the residuals of all, s, shape (n,)."""
    x, z, time = 0.0, 0.0, arrival_s
    estimate: PivotEstimate | None = None
    for _ in range(ROUNDS if late else 1):
        time = arrival_s - late(x, z) if late else arrival_s
        fit = PivotFit(speed_m_s, inf, int(order.max(initial=0)))
        for i in np.nonzero(kept)[0]:
            fit.add(float(theta[i]), float(time[i]), float(sigma_s[i]), int(order[i]))
        estimate = fit.estimate()
        if estimate is None:
            return None
        x, z = estimate.x_m, estimate.z_m
    if estimate is None:
        return None
    expected = [estimate.expected(fit.row(float(a), int(n)))[0] for a, n in zip(theta, order, strict=True)]
    return estimate, time - np.array(expected)
