"""How a circular element responds against angle, for three edge behaviours.

x = k a sin(theta); rigid baffle 2 J1(x)/x; unbaffled that times (1 + cos(theta))/2; soft baffle times cos(theta).
Wear, Baker and Miloro 2018 (doi 10.1109/TUFFC.2018.2855967, abstract) name these models; the cosine factors are
the Kirchhoff obliquity, derived.
"""

from __future__ import annotations

from typing import Literal, get_args

import numpy as np
from numpy.typing import NDArray

Vector = NDArray[np.float64]
Edge = Literal["rigid", "unbaffled", "soft"]
EDGES: tuple[Edge, ...] = get_args(Edge)

# arguments x at which 2 J1(x)/x is -3.000 dB and -6.000 dB (exact decibels, not 1/sqrt(2) and 1/2)
X_3DB = 1.613741196
X_6DB = 2.211785445


def jinc(x: Vector) -> Vector:
    """2 J1(x)/x, shape of `x`; 1 at 0."""
    from scipy.special import j1

    safe = np.where(np.abs(x) < 1e-6, 1.0, x)
    return np.where(np.abs(x) < 1e-6, 1.0 - x * x / 8, 2 * j1(safe) / safe)


def jinc_slope(x: Vector) -> Vector:
    """Derivative of `jinc`, -2 J2(x)/x, shape of `x`."""
    from scipy.special import jv

    safe = np.where(np.abs(x) < 1e-6, 1.0, x)
    return np.where(np.abs(x) < 1e-6, -x / 4, -2 * jv(2, safe) / safe)


def obliquity(theta: Vector, edge: Edge) -> Vector:
    """Factor of the edge behaviour, shape of `theta` (rad)."""
    if edge == "rigid":
        return np.ones_like(theta)
    if edge == "unbaffled":
        return np.asarray((1 + np.cos(theta)) / 2)
    return np.asarray(np.cos(theta))


def obliquity_slope(theta: Vector, edge: Edge) -> Vector:
    """Derivative of `obliquity` by theta."""
    if edge == "rigid":
        return np.zeros_like(theta)
    return np.asarray(-np.sin(theta) * (0.5 if edge == "unbaffled" else 1.0))


def response(theta: Vector, ka: float, edge: Edge) -> Vector:
    """Signed response relative to normal incidence, shape of `theta` (rad)."""
    return np.asarray(jinc(ka * np.sin(theta)) * obliquity(theta, edge))


def angle_at_level(ka: float, level_db: float, edge: Edge) -> float | None:
    """Smallest angle (rad) at which the response has fallen to `level_db`; None when it never does below 90°."""
    from scipy.optimize import brentq

    theta = np.linspace(0.0, np.pi / 2, 4001)
    wanted = 10 ** (level_db / 20)
    below = np.nonzero(response(theta, ka, edge) <= wanted)[0]
    if not below.size or below[0] == 0:
        return None

    def excess(at: float) -> float:
        return float(response(np.array([at]), ka, edge)[0]) - wanted

    return float(brentq(excess, theta[below[0] - 1], theta[below[0]]))


def radius_from_angle(theta: float, frequency_hz: float, speed_m_s: float, level_db: Literal[-3, -6]) -> float:
    """Effective radius (m) from the half-width of the main lobe, by the rigid disc as the standard does.

    a = x c / (2 pi f sin(theta)); theta_3, theta_6 and a_h3, a_h6 of IEC 62127-3 (symbols read in its GOST R
    translation, clause 4), with the exact arguments in place of the rounded 1.62 and 2.22.
    """
    x = X_3DB if level_db == -3 else X_6DB
    return float(x * speed_m_s / (2 * np.pi * frequency_hz * np.sin(theta)))
