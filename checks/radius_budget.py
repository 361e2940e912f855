"""The mean effective radius of a plane with its uncertainty budget."""

from __future__ import annotations

from math import sqrt

import numpy as np

from checks.rotation_fit import PlaneResult
from checks.uncertainty import Budget, Contribution, Input

NOTHING = 1e-15  # m; below that a row is not worth a line


def mean_radius(r: PlaneResult) -> Budget:
    """Mean over frequency, weighted by the radii's own uncertainties; what frequencies share does not average out."""
    fit = r.best
    own = np.sqrt(np.maximum(fit.radius_u_m**2 - fit.model_u_m**2, 0.0))
    weight = 1 / np.maximum(fit.radius_u_m, 1e-4 * fit.radius_m) ** 2
    weight = weight / weight.sum()
    mean = float(weight @ fit.radius_m)
    inner = float(weight**2 @ own**2)
    lines = max(1, fit.radius_m.size - 1)
    scatter = float(weight @ (fit.radius_m - mean) ** 2) / lines
    statistical = Input(mean, sqrt(max(inner, scatter)), freedom=lines if scatter > inner else fit.freedom)
    rows = [Contribution("fit: noise, repeatability, scatter between frequencies", "m", statistical, 1.0)]
    left2 = float(weight @ fit.model_u_m) ** 2
    for doubt in r.doubts:
        moved = float(weight @ doubt.radius_moved_m)
        left2 -= float(weight @ np.abs(doubt.radius_moved_m)) ** 2
        if doubt.given.u > 0:
            rows.append(Contribution(doubt.what, doubt.unit, doubt.given, moved / doubt.given.u))
    # what is left of the shared part is what another edge behaviour would give
    if left2 > NOTHING**2 and not r.edge_is_known:
        rows.append(Contribution("edge behaviour", "m", Input(0.0, sqrt(left2)), 1.0))
    speed = Input(r.speed_m_s, r.speed_u * r.speed_m_s)
    rows.append(Contribution("speed of sound: temperature and formula", "m/s", speed, mean / r.speed_m_s))
    return Budget("mean effective radius", "m", mean, tuple(rows))
