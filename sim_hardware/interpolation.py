"""Lagrange interpolation between equally spaced points."""

from __future__ import annotations

import math

import numpy as np
from numpy.typing import NDArray


def stencil(
    position: NDArray[np.float64], points: int, lowest: int | None = None, highest: int | None = None
) -> tuple[NDArray[np.intp], NDArray[np.float64]]:
    """Grid points around each position and their weights, both of shape (positions, points).

    Args:
        position: shape (positions,), counted in grid points.
        points: even number of neighbours that take part.
        lowest: first grid point there is, where there is an end.
        highest: last grid point there is, where there is an end.
    """
    base = np.floor(position).astype(np.intp) - (points // 2 - 1)
    if lowest is not None:
        base = np.maximum(base, lowest)
    if highest is not None:
        base = np.minimum(base, highest - points + 1)
    away = [position - base - i for i in range(points)]
    weights = np.empty((points, position.size))
    for i, row in enumerate(weights):
        row[:] = 1 / math.prod(i - j for j in range(points) if j != i)
        for j in range(points):
            if j != i:
                row *= away[j]
    return base[:, None] + np.arange(points), weights.T
