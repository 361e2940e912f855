"""The beam that an element of some size was moved through: its true profile, fitted to what was measured.

The true amplitude is taken as exp(-u - b (u²/6 + u³/18 + u⁴/45)) with u = (r/w)², the same all round its axis: b = 0
is a Gaussian beam, and b = 1 that of a circular source, 2 J1(v)/v with u = v²/8, to the eighth order in v (its
logarithm is -sum of s_k v^2k/k with Rayleigh's sums over the zeros of J1, s = 1/8, 1/192, 1/3072, 1/46080; G. N.
Watson, Theory of Bessel Functions, 15.51, from memory). Averaged over the face it must give the measured profile,
from its top down to `DOWN_DB`.
"""

from __future__ import annotations

from dataclasses import dataclass

import numpy as np
from numpy.typing import NDArray

from checks.averaging import LEVEL_6DB, W6_TO_W, averaged
from checks.beam import width_of
from checks.errors import MeasurementError

Vector = NDArray[np.float64]
DOWN_DB = 8.0  # farther down, the side lobes have their say
STEEPEST, SHALLOWEST = 2.0, -0.6  # b
FEWEST = 6
FARTHEST = 100.0  # u; nothing is left there


@dataclass(frozen=True)
class Profile:
    """A true profile: width `w_m` and exponent `b` as above."""

    w_m: float
    b: float

    def at(self, r_m: Vector) -> Vector:
        """Amplitude over that on the axis, shape of `r_m`; it does not rise again far out."""
        u = (r_m / self.w_m) ** 2
        if self.b < 0:
            u = np.minimum(u, self._turn())
        u = np.minimum(u, FARTHEST)
        return np.asarray(np.exp(-u - self.b * u**2 * (1 / 6 + u * (1 / 18 + u / 45))))

    def _turn(self) -> float:
        """Where the amplitude would begin to rise, as u."""
        from scipy.optimize import brentq

        return float(brentq(lambda u: 1 + self.b * u * (1 / 3 + u * (1 / 6 + u * 4 / 45)), 0.0, 1 - 3 / self.b))

    def read(self, radius_m: float, at_m: Vector) -> Vector:
        """What a disc of that radius reads with its centre at `at_m`, shape (n,)."""
        return averaged(self.at, radius_m, at_m)

    def share(self, radius_m: float) -> float:
        """Of the peak that a disc reads."""
        return float(self.read(radius_m, np.zeros(1))[0])

    def widening(self, radius_m: float) -> float:
        """Width at -6 dB that a disc measures, over the true one."""
        from scipy.optimize import brentq

        half = self.w_m / (2 * W6_TO_W)
        true = float(brentq(lambda r: float(self.at(np.array([r]))[0]) - LEVEL_6DB, 0.0, 2 * half, xtol=1e-9 * half))
        wanted = LEVEL_6DB * self.share(radius_m)
        end = 2 * half + 2 * radius_m
        read = brentq(lambda r: float(self.read(radius_m, np.array([r]))[0]) - wanted, 0.0, end, xtol=1e-9 * half)
        return float(read) / true


@dataclass(frozen=True)
class Fitted:
    """What a fit says of averaging: share of the peak that is read, and measured over true width, each with its u."""

    profile: Profile
    share: float
    share_u: float
    widening: float
    widening_u: float


def fit_profile(position_m: Vector, amplitude: Vector, sigma: Vector, radius_m: float) -> Fitted:
    """Fit the true profile; all of shape (n,), `sigma` the standard uncertainty of the amplitudes.

    Raises:
        MeasurementError: too few points near the top, or no beam of this kind that an element of that radius would
            have measured so.
    """
    from scipy.optimize import least_squares

    up = np.argsort(position_m)
    x, y = position_m[up], amplitude[up] / amplitude.max()
    s = np.maximum(sigma[up] / amplitude.max(), 1e-6)
    width = width_of(x, y, s)
    inside = _near_the_top(y)
    if inside.sum() < FEWEST:
        raise MeasurementError(f"{inside.sum()} points within {DOWN_DB:g} dB of the peak: {FEWEST} are needed")
    x, y, s = x[inside], y[inside], s[inside]
    scale = width.width_m * W6_TO_W

    def residual(p: Vector) -> Vector:
        read = Profile(float(p[2]) * scale, float(p[3])).read(radius_m, np.abs(x - width.peak_m - p[1] * scale))
        return np.asarray((p[0] * read - y) / s)

    limits = ([0.5, -1.0, 0.2, SHALLOWEST], [3.0, 1.0, 1.5, STEEPEST])
    solved = least_squares(residual, [1.0, 0.0, 0.95, 0.0], bounds=limits, x_scale=[1.0, 0.1, 1.0, 0.1])
    w, b = float(solved.x[2]) * scale, float(solved.x[3])
    if not solved.success or w < 0.21 * scale:
        raise MeasurementError("no beam fits what was measured: the element hides it")
    chi2 = 2 * float(solved.cost) / max(1, x.size - 4)
    jacobian = np.asarray(solved.jac, np.float64)
    covariance = np.linalg.pinv(jacobian.T @ jacobian)[2:, 2:] * max(1.0, chi2)
    best = Profile(w, b)
    share, widening = best.share(radius_m), best.widening(radius_m)
    slopes = []
    for changed, step in ((Profile(w * 1.001, b), w / scale / 1000), (Profile(w, b + 1e-3), 1e-3)):
        slopes.append(((changed.share(radius_m) - share) / step, (changed.widening(radius_m) - widening) / step))
    gradient = np.array(slopes)
    u = np.sqrt(np.maximum(np.diag(gradient.T @ covariance @ gradient), 0.0))
    return Fitted(best, share, float(u[0]), widening, float(u[1]))


def _near_the_top(y: Vector) -> NDArray[np.bool_]:
    """Points between the first ones on either side of the largest that are `DOWN_DB` below it."""
    top = int(np.argmax(y))
    low = np.nonzero(y < y[top] * 10 ** (-DOWN_DB / 20))[0]
    first = low[low < top].max(initial=-1) + 1
    last = low[low > top].min(initial=y.size)
    inside = np.zeros(y.size, np.bool_)
    inside[first:last] = True
    return inside
