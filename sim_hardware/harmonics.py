"""How strong the harmonics of a plane wave are after it has steepened on its way."""

from __future__ import annotations

import numpy as np
from numpy.typing import NDArray

_NODES = 800


def harmonic_amplitudes(shock_parameter: float, count: int) -> NDArray[np.float64]:
    """Amplitudes B_1 ... B_count over the amplitude that the wave started with, shape (count,).

    p = p0 sum B_n sin(n omega tau) is lossless; it holds before, through and after the formation of the shock:
    B_n = 2/(n pi) sin P + 2/(n pi sigma) integral from P to pi of cos(n (F - sigma sin F)) dF, with P = sigma
    sin P, and P = 0 up to sigma = 1 (Blackstock, J. Acoust. Soc. Am. 39 (1966) 1019). The integral is taken
    numerically.
    """
    n = np.arange(1, count + 1, dtype=np.float64)
    if shock_parameter == 0:
        return np.where(n == 1, 1.0, 0.0)
    start = _shock_phase(shock_parameter)
    x, weight = np.polynomial.legendre.leggauss(_NODES)
    phase = start + (np.pi - start) * (x + 1) / 2
    weight = weight * (np.pi - start) / 2
    integral = np.cos(n[:, None] * (phase - shock_parameter * np.sin(phase))) @ weight
    amplitudes: NDArray[np.float64] = 2 / (n * np.pi) * (np.sin(start) + integral / shock_parameter)
    return amplitudes


def _shock_phase(sigma: float) -> float:
    """The root P of P = sigma sin P in (0, pi); 0 where there is no shock yet."""
    if sigma <= 1:
        return 0.0
    low, high = 1e-9, np.pi
    for _ in range(80):
        middle = (low + high) / 2
        low, high = (middle, high) if middle < sigma * np.sin(middle) else (low, middle)
    return low
