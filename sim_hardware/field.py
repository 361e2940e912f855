"""Pressure of a circular source by adding up its surface, frequency by frequency.

The Rayleigh integral p = (j k / 2 pi) integral of exp(-j k R) / R over the face, over rho c u0, is summed over
nodes: Gauss-Legendre along the depth of the bowl (along the square of the radius of a plane face), where equal
steps are equal areas, and trapezoids around. Time runs as exp(+j omega t). The factor exp(-j k D), D the distance
from the centre of the face, is left out, so that what remains changes slowly from place to place.

A harmonic that is made in the water on the way has a narrower beam than the wave it comes from, and follows its
wavefront. It is given a virtual source: radius a n^-(1-p), and as much more curvature as keeps, at the reference
distance, the shape of the fundamental's beam, n^p times narrower.
"""

from __future__ import annotations

import math
from dataclasses import dataclass
from functools import lru_cache

import numpy as np
from numpy.typing import NDArray

Complex = NDArray[np.complex64]
Real = NDArray[np.float64]
_NEAR_FIELD = 0.9 * math.pi  # of q: beyond it lies the axial null next to the last maximum


@dataclass(frozen=True)
class SourceShape:
    """A circular source: plane where `focal_m` is None, else part of a sphere of that radius."""

    radius_m: float
    focal_m: float | None
    beam_exponent: float
    reference_m: float

    def radius(self, order: float) -> float:
        """Radius in m of the virtual source of a component at `order` times the drive's frequency."""
        return float(self.radius_m * max(order, 1.0) ** (self.beam_exponent - 1))

    def added_curvature(self, order: float, wavenumber: float) -> float:
        """What the virtual source's curvature exceeds the real one's by, in 1/m, at a component's wavenumber.

        A harmonic grows out of the wave itself along its way, so at the reference point its wavefronts are bent as
        those of the drive's frequency. With K = k a²/4 and q = K (1/z - 1/F) the bend on the axis is
        1/z + (K/z²)(cot q - 1/q) (paraxial, from O'Neil's axial pressure; derived). Within the near field, where the
        axis tells nothing of the wave beside it, the virtual source stands to its own near field as the real one.
        """
        if order <= 1.0:
            return 0.0
        away = 1 / self.reference_m - self.curvature
        drive = wavenumber / order * self.radius_m**2 / 4
        own = wavenumber * self.radius(order) ** 2 / 4
        return away - _as_bent(drive * away, drive / own) / own

    @property
    def curvature(self) -> float:
        """Curvature of the face in 1/m; 0 for a plane one."""
        return 0.0 if self.focal_m is None else 1 / self.focal_m


def relative_pressure(shape: SourceShape, wavenumber: float, order: float, r: Real, z: Real) -> Complex:
    """Pressure p exp(+j k D) / (rho c u0) at points `r` from the beam axis and `z` along it, arrays of one shape.

    Args:
        shape: the source.
        wavenumber: k in rad/m; zero gives zero.
        order: frequency over the drive's frequency; decides the virtual source. 1 is the face itself.
        r: distances from the axis, m.
        z: distances along the axis, m, positive.
    """
    if wavenumber <= 0:
        return np.zeros(r.shape, np.complex64)
    a = shape.radius(order)
    rings, spokes = _density(shape, wavenumber, order, r, z)
    depth_m, rho_m, area = _rings(a, shape.focal_m, rings)
    cosine = np.cos((np.arange(spokes) + 0.5) * math.pi / spokes).astype(np.float32)
    rp, zp = r.reshape(-1, 1), z.reshape(-1, 1)
    distance = np.hypot(rp, zp)
    steady = (rho_m**2 if shape.focal_m is None else 2 * depth_m * (shape.focal_m - zp)) + 0 * rp
    extra = (wavenumber * shape.added_curvature(order, wavenumber) / 2 * rho_m**2).astype(np.float32)
    # R - D = (R^2 - D^2) / (R + D) keeps its digits in single precision, where R - D itself would lose them.
    excess = (2 * rp * rho_m).astype(np.float32)[..., None] * -cosine
    excess += steady.astype(np.float32)[..., None]
    d = distance.astype(np.float32)[..., None]
    path = np.sqrt(excess + d * d)
    excess /= path + d
    excess *= np.float32(-wavenumber)
    excess += extra[:, None]
    weighted = (area / spokes).astype(np.float32)
    total = np.empty(rp.shape[0], np.complex64)
    total.real = (np.cos(excess) / path).sum(axis=2) @ weighted
    total.imag = (np.sin(excess) / path).sum(axis=2) @ weighted
    return (total * np.complex64(1j * wavenumber / (2 * math.pi))).reshape(r.shape)


@lru_cache(maxsize=4096)
def _as_bent(q: float, share: float) -> float:
    """The q of a virtual source for which cot q - 1/q is `share` of that of the real one's: by halving, it is monotone.

    A library's root finder would cost the first capture more time in being loaded than a client waits for it.
    """
    if abs(q) < 1e-6 or abs(q) >= _NEAR_FIELD:
        return q

    def bend(at: float) -> float:
        return 1 / math.tan(at) - 1 / at

    wanted, low, high = share * bend(abs(q)), 0.0, abs(q)
    for _ in range(50):
        middle = (low + high) / 2
        low, high = (middle, high) if bend(middle) > wanted else (low, middle)
    return math.copysign(high, q)


def _density(shape: SourceShape, wavenumber: float, order: float, r: Real, z: Real) -> tuple[int, int]:
    """Nodes along the radius and around (over half a turn) that the phase across the source needs."""
    a = shape.radius(order)
    sideways = wavenumber * a * float(np.max(r / np.hypot(r, z)))
    curvature = shape.curvature + shape.added_curvature(order, wavenumber)
    inward = wavenumber * a**2 / 2 * float(np.max(np.abs(1 / np.hypot(r, z) - curvature)))
    # A sum over N spokes of half a turn is exact for waves up to order 2 N; Bessel functions die out some way
    # above their argument. Gauss-Legendre wants rather more than half a node per radian of half the phase.
    spokes = math.ceil(sideways / 2 + 2.2 * sideways ** (1 / 3)) + 6
    rings = math.ceil(0.30 * inward + 0.40 * sideways) + 9
    return rings, spokes


def _rings(a: float, focal: float | None, count: int) -> tuple[Real, Real, Real]:
    """Depths, radii and areas of `count` rings of the face."""
    x, w = _legendre(count)
    u = (x + 1) / 2
    if focal is None:
        return np.zeros(count), a * np.sqrt(u), math.pi * a**2 * w / 2
    rim = focal - math.sqrt(focal**2 - a**2)
    depth = rim * u
    return depth, np.sqrt(depth * (2 * focal - depth)), 2 * math.pi * focal * rim * w / 2


@lru_cache(maxsize=512)
def _legendre(count: int) -> tuple[Real, Real]:
    x, w = np.polynomial.legendre.leggauss(count)
    return x, w
