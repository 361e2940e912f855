"""How the wave of a circular source is bent where it meets the element."""

from __future__ import annotations

from math import inf, pi, tan

from checks.observation import Circumstances

WATER_M_S = 1485.0  # curvature and width of a beam need not be known better
BEAM_EXPONENT = -0.75  # of the width of a harmonic: between quasi-linear -1/2 and linear -1
SOURCE_U = 0.03  # relative standard uncertainty of the source radius in a profile; common practice, no source
FLAT = 0.05
STRONGEST = 2.0  # over the distance; between the nulls of a near field the axis tells nothing of the wave beside it


def curvature(c: Circumstances, source: float = 1.0) -> float:
    """Curvature of the wavefront on the axis at the drive frequency, 1/m; positive where it runs apart.

    `source` is the true radius of the source over the one in the profile.

    On the axis of a piston, plane or focused at F, the envelope is (1 - exp(-i phi)) / (1 - z/F) with
    phi = k a²/2 (1/z - 1/F) (H. T. O'Neil 1949, to second order in a/z). The paraxial wave equation turns its
    derivative along z into the one across: 1/R = k a²/(4 z²) cot(phi/2) - 1/(F - z) (derived). Far away and in the
    focal plane that is 1/z; at the last maximum of a plane piston, z = a²/lambda, the wave is plane.
    """
    z, k = c.distance_m, 2 * pi * c.drive_hz / WATER_M_S
    gather = 0.0 if c.focal_length_m is None else 1 / c.focal_length_m
    strength = k * (source * c.source_radius_m) ** 2 / (4 * z * z)
    half = strength * z * (1 - z * gather)
    if abs(half) < FLAT:  # cot(x) = 1/x - x/3
        return 1 / z - strength * half / 3
    bent = strength / tan(half) - gather / (1 - z * gather)
    return max(-STRONGEST / z, min(STRONGEST / z, bent))


def wave_radius(c: Circumstances) -> float:
    """Radius of curvature R, m, signed as `curvature`; infinite for a plane wave."""
    bent = curvature(c)
    return 1 / bent if bent else inf
