"""In which order the angles of a rotation are visited.

Swept one way, a slow drift is nearly the same function of the angle as a lateral pivot offset, and inflates its
uncertainty many times. The default visits every other angle on the way out and the ones between on the way back,
so that time and sin(theta) are nearly uncorrelated, at about twice the motion of a single sweep.
"""

from __future__ import annotations

import numpy as np
from numpy.typing import NDArray

from profiles.scan import RotationOrder


def ordered(count: int, order: RotationOrder) -> NDArray[np.intp]:
    """Permutation of `count` ascending angles into the order of visiting, shape (count,).

    interleaved: the even ones upwards, then the odd ones downwards.
    out-and-back: from the middle to the upper end, back over the ones left out to the lower end, to the middle.
    one-way, as-listed: as they are.
    """
    index = np.arange(count)
    if order == "interleaved":
        return np.concatenate([index[::2], index[1::2][::-1]])
    if order == "out-and-back":
        middle = count // 2
        upper, lower = index[middle:], index[:middle][::-1]
        return np.concatenate([upper[::2], upper[1::2][::-1], lower[::2], lower[1::2][::-1]])
    return index


def drift_inflation(theta: NDArray[np.float64]) -> float:
    """How many times a free linear drift raises the standard uncertainty of the lateral pivot offset.

    `theta` are the angles (rad) in the order of visiting. The model is t = t0 + (ez cos - ex sin)/c, white noise
    (linear least squares; the Cramér-Rao bound of that model).
    """
    ones = np.ones_like(theta)
    model = np.stack([ones, -np.sin(theta), np.cos(theta)], axis=1)
    drift = np.linspace(-1, 1, theta.size)[:, None]
    plain = np.linalg.inv(model.T @ model)[1, 1]
    full = np.hstack([model, drift])
    drifting = np.linalg.inv(full.T @ full)[1, 1]
    return float(np.sqrt(drifting / plain))
