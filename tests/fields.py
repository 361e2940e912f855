"""Fields of sources, added up on grids of their own: what tests hold the package and the simulator against."""

from __future__ import annotations

import numpy as np
from numpy.typing import NDArray

Array = NDArray[np.float64]


def piston_pressure(
    r_m: Array, z_m: Array, radius_m: float, frequency_hz: float, speed_m_s: float
) -> NDArray[np.complex128]:
    """Pressure of a plane circular source at points (r, z), each of shape (n,), by adding up the Rayleigh integral."""
    k = 2 * np.pi * frequency_hz / speed_m_s
    q, w = np.polynomial.legendre.leggauss(160)
    q, w = radius_m * (q + 1) / 2, w * radius_m / 2
    phi = (np.arange(360) + 0.5) * 2 * np.pi / 360
    x, y = np.outer(q, np.cos(phi)), np.outer(q, np.sin(phi))
    weight = np.outer(w * q, np.full(phi.size, 2 * np.pi / 360))
    values = []
    for at, along in zip(r_m, z_m, strict=True):
        d = np.sqrt((x - at) ** 2 + y**2 + along**2)
        values.append(np.sum(weight * np.exp(-1j * k * d) / d))
    return np.array(values)
