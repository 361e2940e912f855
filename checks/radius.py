"""Effective radius against frequency: the whole pattern fitted for each edge behaviour, the best fit first.

For each edge behaviour all frequencies share one angle zero; each has its own radius and amplitude. The
behaviours are compared by the corrected Akaike criterion. The frequency law a² = a0² + (b/f)² is fitted to the
radii: with the wrong edge behaviour the radius falls with frequency like that, which is a diagnosis and no
property of the element.
"""

from __future__ import annotations

from collections.abc import Mapping, Sequence
from dataclasses import dataclass, field, replace

import numpy as np
from numpy.typing import NDArray

from checks.directivity import HalfAngle, PlaneResponse
from checks.element import (
    EDGES,
    Edge,
    jinc,
    jinc_slope,
    obliquity,
    obliquity_slope,
    radius_from_angle,
)
from checks.errors import MeasurementError

Vector = NDArray[np.float64]
CANNOT_TELL = 6.0  # difference of the criterion below which two behaviours are not told apart


@dataclass(frozen=True)
class RadiusFit:
    """Fit of one plane with one edge behaviour; J frequencies.

    Attributes:
        frequencies_hz, radius_m, radius_u_m, amplitude_v: shape (J,).
        angle_zero: rad, true zero as the stage counts, with its standard uncertainty.
        reduced_chi2: of the fit; uncertainties take the scatter that is seen where it exceeds the stated one.
        criterion: corrected Akaike criterion; smaller is better.
        model_u_m: the part of `radius_u_m` that all frequencies have in common.
    """

    edge: Edge
    frequencies_hz: Vector
    radius_m: Vector
    radius_u_m: Vector
    amplitude_v: Vector
    angle_zero: float
    angle_zero_u: float
    reduced_chi2: float
    criterion: float
    points: int
    model_u_m: Vector = field(default_factory=lambda: np.zeros(0))

    @property
    def freedom(self) -> int:
        """Degrees of freedom of the residuals."""
        return max(1, self.points - 1 - 2 * self.frequencies_hz.size)


def fit_edges(plane: PlaneResponse, speed_m_s: float, nominal_radius_m: float) -> list[RadiusFit]:
    """Fits for all edge behaviours, the best first.

    Raises:
        MeasurementError: no usable frequency.
    """
    return sorted((fit_edge(plane, speed_m_s, nominal_radius_m, edge) for edge in EDGES), key=lambda f: f.criterion)


def fit_edge(plane: PlaneResponse, speed_m_s: float, nominal_radius_m: float, edge: Edge) -> RadiusFit:
    """The fit for one edge behaviour.

    Raises:
        MeasurementError: no usable frequency.
    """
    lines = np.nonzero(plane.usable)[0]
    if not lines.size:
        raise MeasurementError("at no frequency is there enough signal over noise: more drive, or more averages")
    return _fit(plane, lines, speed_m_s, nominal_radius_m, edge)


def told_apart(fits: Sequence[RadiusFit]) -> bool:
    """Whether the data say which edge behaviour it is; `fits` sorted, best first."""
    return len(fits) < 2 or fits[1].criterion - fits[0].criterion > CANNOT_TELL


def in_doubt(fits: Sequence[RadiusFit]) -> list[RadiusFit]:
    """The fits, the best one with what the other edge behaviours would give as one more uncertainty.

    Each weighs exp(-d/2) for a criterion larger by d (Akaike weights; the unconditional variance of K. P. Burnham and
    D. R. Anderson, Model Selection and Multimodel Inference, 2002, from memory). Where the data tell the behaviours
    apart this is nothing.
    """
    best = fits[0]
    weight = np.exp(-0.5 * np.array([f.criterion - best.criterion for f in fits]))
    weight = weight / weight.sum()
    radius = np.sqrt(weight @ np.array([(f.radius_m - best.radius_m) ** 2 for f in fits]))
    zero = np.sqrt(weight @ np.array([(f.angle_zero - best.angle_zero) ** 2 for f in fits]))
    common = np.hypot(radius, best.model_u_m) if best.model_u_m.size else radius
    doubted = replace(
        best,
        radius_u_m=np.hypot(best.radius_u_m, radius),
        angle_zero_u=float(np.hypot(best.angle_zero_u, zero)),
        model_u_m=common,
    )
    return [doubted, *fits[1:]]


def _fit(plane: PlaneResponse, lines: NDArray[np.intp], speed_m_s: float, nominal_m: float, edge: Edge) -> RadiusFit:
    from scipy.optimize import least_squares

    rows = np.isfinite(plane.amplitude).all(axis=1)
    theta, data = plane.theta[rows], plane.amplitude[rows][:, lines]
    sigma = plane.sigma[rows][:, lines]
    k = 2 * np.pi * plane.frequencies_hz[lines] / speed_m_s
    scale = plane.reference[lines]
    count = lines.size

    def unpack(p: Vector) -> tuple[float, Vector, Vector]:
        return float(p[0]), np.abs(p[1 : 1 + count]) * nominal_m, p[1 + count :] * scale

    def residual(p: Vector) -> Vector:
        zero, radius, amplitude = unpack(p)
        turned = theta - zero
        x = np.outer(np.sin(turned), k * radius)
        model = jinc(x) * obliquity(turned, edge)[:, None] * amplitude
        return np.asarray(((model - data) / sigma).ravel())

    def jacobian(p: Vector) -> Vector:
        zero, radius, amplitude = unpack(p)
        turned = theta - zero
        sine, cosine = np.sin(turned), np.cos(turned)
        x = np.outer(sine, k * radius)
        shape, slope = jinc(x), jinc_slope(x)
        ob, ob_slope = obliquity(turned, edge)[:, None], obliquity_slope(turned, edge)[:, None]
        by_zero = -(slope * np.outer(cosine, k * radius) * ob + shape * ob_slope) * amplitude / sigma
        by_radius = slope * np.outer(sine, k) * ob * amplitude * nominal_m / sigma
        by_amplitude = shape * ob * scale / sigma
        n = theta.size
        out = np.zeros((n, count, 1 + 2 * count))
        out[:, :, 0] = by_zero
        for j in range(count):
            out[:, j, 1 + j] = by_radius[:, j]
            out[:, j, 1 + count + j] = by_amplitude[:, j]
        return out.reshape(n * count, -1)

    best = None
    for start in (1.0, 1.6):
        p0 = np.concatenate([[0.0], np.full(count, start), np.ones(count)])
        solved = least_squares(residual, p0, jac=jacobian, method="lm", x_scale="jac", max_nfev=200)
        if best is None or solved.cost < best.cost:
            best = solved
    if best is None:
        raise MeasurementError("the pattern could not be fitted")
    zero, radius, amplitude = unpack(best.x)
    total, parameters = data.size, 1 + 2 * count
    chi2 = 2 * float(best.cost)
    freedom = max(1, total - parameters)
    final = jacobian(best.x)
    covariance = _covariance(final.reshape(theta.size, count, parameters), residual(best.x).reshape(theta.size, count))
    spread = np.sqrt(np.diag(covariance))
    penalty = 2 * parameters + 2 * parameters * (parameters + 1) / max(1, total - parameters - 1)
    return RadiusFit(
        edge=edge,
        frequencies_hz=plane.frequencies_hz[lines],
        radius_m=radius,
        radius_u_m=spread[1 : 1 + count] * nominal_m,
        amplitude_v=amplitude,
        angle_zero=zero,
        angle_zero_u=float(spread[0]),
        reduced_chi2=chi2 / freedom,
        criterion=total * float(np.log(max(chi2, 1e-300) / total)) + penalty,
        points=total,
    )


def _covariance(jacobian: Vector, residual: Vector) -> Vector:
    """Covariance of the parameters, shape (P, P), from shapes (n, J, P) and (n, J), both over sigma.

    What wanders from point to point (drive, water) moves all lines of a point together, so its points and not its
    numbers count: least squares, with the covariance of the residuals between lines put between (a sandwich). A
    line that scatters less than stated is taken as stated.
    """
    n, lines, parameters = jacobian.shape
    freedom = max(1.0, n - parameters / lines)
    between = residual.T @ residual / freedom
    own = np.sqrt(np.maximum(np.diag(between), 1e-300))
    between = between * np.outer(np.maximum(own, 1.0) / own, np.maximum(own, 1.0) / own)
    flat = jacobian.reshape(n * lines, parameters)
    bread = np.linalg.pinv(flat.T @ flat)
    mixed = np.einsum("kl,ilp->ikp", between, jacobian).reshape(n * lines, parameters)
    return np.asarray(bread @ (flat.T @ mixed) @ bread)


@dataclass(frozen=True)
class AngleRadius:
    """Effective radius from the half-angles at one frequency, m; None where a level is never reached."""

    frequency_hz: float
    a3_m: float | None
    a6_m: float | None
    mean_m: float | None
    standard_uncertainty_m: float | None


def radii_from_angles(
    plane: PlaneResponse, halves: Mapping[tuple[int, float], HalfAngle], speed_m_s: float
) -> list[AngleRadius]:
    """As the standard does it, at every usable frequency: mean of a_h3 and a_h6 where both exist.

    `halves` has the half-angles by number of the line and level in dB, -3 and -6.
    """
    found = []
    for line in np.nonzero(plane.usable)[0]:
        frequency = float(plane.frequencies_hz[line])
        values: list[float | None] = []
        spreads: list[float] = []
        for level in (-3, -6):
            half = halves[int(line), float(level)]
            if half.half_width is None or half.half_width <= 0:
                values.append(None)
                continue
            a = radius_from_angle(half.half_width, frequency, speed_m_s, -3 if level == -3 else -6)
            values.append(a)
            spreads.append(a * half.half_width_u / np.tan(half.half_width))
        a3, a6 = values
        both = a3 is not None and a6 is not None
        mean = (a3 + a6) / 2 if a3 is not None and a6 is not None else None
        u = float(np.linalg.norm(spreads)) / 2 if both else None
        found.append(AngleRadius(frequency, a3, a6, mean, u))
    return found


@dataclass(frozen=True)
class RadiusLaw:
    """a² = a0² + (b/f)²: `radius_m` is a0; `term_m2_hz2` is b² (may come out negative) with covariance (2, 2)."""

    radius_m: float
    radius_u_m: float
    term_m2_hz2: float
    covariance: Vector

    def at(self, frequency_hz: Vector) -> tuple[Vector, Vector]:
        """Radius and its standard uncertainty in m, each of the shape of `frequency_hz`."""
        column = 1 / frequency_hz**2
        square = np.maximum(self.radius_m**2 + self.term_m2_hz2 * column, 1e-18)
        variance = self.covariance[0, 0] + 2 * column * self.covariance[0, 1] + column**2 * self.covariance[1, 1]
        radius = np.sqrt(square)
        return radius, np.sqrt(np.maximum(variance, 0.0)) / (2 * radius)


def fit_law(fit: RadiusFit, speed_u: float = 0.0) -> RadiusLaw | None:
    """Weighted linear least squares of a² against 1/f²; None with fewer than three frequencies.

    What all frequencies have in common, `model_u_m` and the relative standard uncertainty `speed_u` of the speed of
    sound, does not show in the scatter of the radii: it stretches a0 and b together.
    """
    if fit.frequencies_hz.size < 3:
        return None
    square = fit.radius_m**2
    weight = 1 / (2 * fit.radius_m * np.maximum(fit.radius_u_m, 1e-12))
    model = np.stack([np.ones_like(square), 1 / fit.frequencies_hz**2], axis=1)
    scale = np.abs(model).max(axis=0)
    weighted = model / scale * weight[:, None]
    solution, *_ = np.linalg.lstsq(weighted, square * weight, rcond=None)
    residual = weighted @ solution - square * weight
    freedom = max(1, square.size - 2)
    covariance = np.linalg.pinv(weighted.T @ weighted) * max(1.0, float(residual @ residual) / freedom)
    covariance = covariance / np.outer(scale, scale)
    solution = solution / scale
    shared = float(np.average(fit.model_u_m / fit.radius_m, weights=weight**2)) if fit.model_u_m.size else 0.0
    covariance = covariance + 4 * (shared**2 + speed_u**2) * np.outer(solution, solution)
    radius = float(np.sqrt(max(solution[0], 1e-18)))
    u = float(np.sqrt(covariance[0, 0])) / (2 * radius)
    return RadiusLaw(radius, u, float(solution[1]), covariance)
