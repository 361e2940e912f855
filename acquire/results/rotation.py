"""Results of a rotation scan: response, half-angles, effective radius, angle zero, pivot offset, plane by plane."""

from __future__ import annotations

from collections.abc import Sequence
from math import sqrt

import numpy as np
from numpy.typing import NDArray

from acquire.results.quantity import Quantity
from checks.directivity import plane_responses
from checks.observation import Circumstances, Observation
from checks.radius_budget import mean_radius
from checks.rotation_fit import PlaneResult, edge_words, fit_plane
from checks.warmth import smoothed
from checks.water import speed_of_sound

CONVENTION = "levels are exact decibels: 2 J1(x)/x is -3 dB at x = 1.613741 and -6 dB at x = 2.211785"


def rotation_results(seen: Sequence[Observation], circumstances: Circumstances) -> list[PlaneResult]:
    """Results of every plane.

    Raises:
        MeasurementError: the data do not suffice; one line.
    """
    warmth = float(np.mean([o.temperature_c for o in seen]))
    speed = speed_of_sound(warmth)
    warmths = smoothed(np.array([o.temperature_c for o in seen]))
    delays = {o.index: circumstances.distance_m / speed_of_sound(float(t)) for o, t in zip(seen, warmths, strict=True)}
    return [fit_plane(response, circumstances, speed, delays) for response in plane_responses(seen, circumstances)]


def quantities(results: Sequence[PlaneResult], circumstances: Circumstances) -> list[Quantity]:
    """Every result as a quantity."""
    found: list[Quantity] = []
    for r in results:
        plane = {"plane_deg": round(float(np.degrees(r.response.phi)), 4)}
        found += _levels(r, plane) + _half_angles(r, plane) + _radii(r, plane) + _geometry(r, plane, circumstances)
    return found


def _levels(r: PlaneResult, plane: dict[str, float]) -> list[Quantity]:
    level = r.fitted.level_db()
    relative = r.fitted.sigma / np.maximum(np.abs(np.nan_to_num(r.fitted.amplitude)), 1e-300)
    u = 20 / np.log(10) * np.hypot(relative, r.response.reference_sigma / np.abs(r.response.reference))
    found = []
    for line in np.nonzero(r.response.usable)[0]:
        frequency = float(r.response.frequencies_hz[line])
        for i, theta in enumerate(r.response.theta):
            value = float(level[i, line])
            found.append(
                Quantity(
                    "directional response",
                    value if np.isfinite(value) else None,
                    "dB",
                    float(u[i, line]) if np.isfinite(value) else None,
                    plane | {"frequency_hz": frequency, "angle_deg": round(float(np.degrees(theta)), 6)},
                    "component in the gate over its mean at the reference points, as in a plane wave",
                )
            )
    return found


def _half_angles(r: PlaneResult, plane: dict[str, float]) -> list[Quantity]:
    found = []
    for (line, level), half in r.halves.items():
        conditions = plane | {"frequency_hz": float(r.response.frequencies_hz[line]), "level_db": level}
        for side, value, u in (("left", half.left, half.left_u), ("right", half.right, half.right_u)):
            found.append(
                Quantity(
                    "half-angle",
                    None if value is None else float(np.degrees(value)),
                    "deg",
                    None if value is None else float(np.degrees(u)),
                    conditions | {"side": side},
                    "first crossing of the level" if value is not None else "the level is not reached in the span",
                )
            )
    return found


def _radii(r: PlaneResult, plane: dict[str, float]) -> list[Quantity]:
    fit, found = r.best, []
    method = f"fit of the whole pattern, {edge_words(fit.edge)}"
    if not r.edge_is_known:
        method += "; the data do not tell the edge behaviours apart"
    for f, a, u in zip(fit.frequencies_hz, fit.radius_m, fit.radius_u_m, strict=True):
        whole = sqrt(float(u) ** 2 + (r.speed_u * float(a)) ** 2)
        conditions = plane | {"frequency_hz": float(f), "edge": fit.edge}
        found.append(Quantity("effective radius", float(a), "m", whole, conditions, method))
    for by in r.by_angles:
        at: dict[str, float | str] = {**plane, "frequency_hz": by.frequency_hz, "edge": "rigid"}
        told = f"mean of a_h3 and a_h6 as in IEC 62127-3; {CONVENTION}" if by.mean_m else "a level is not reached"
        u_angles = by.standard_uncertainty_m
        found += [Quantity("effective radius from half-angles", by.mean_m, "m", u_angles, at, told)]
    budget = mean_radius(r)
    words = f"weighted mean over frequency; {method}"
    at_edge = plane | {"edge": fit.edge}
    found.append(Quantity("mean effective radius", budget.value, "m", budget.u, at_edge, words, budget))
    if r.law is not None:
        text = "a² = a0² + (b/f)² fitted to the radii"
        found.append(Quantity("effective radius at high frequency", r.law.radius_m, "m", r.law.radius_u_m, plane, text))
        b2, b2_u = r.law.term_m2_hz2, sqrt(float(r.law.covariance[1, 1]))
        found.append(Quantity("frequency term of the radius", b2, "m2 Hz2", b2_u, plane, f"b² in {text}"))
    return found


def _geometry(r: PlaneResult, plane: dict[str, float], circumstances: Circumstances) -> list[Quantity]:
    zero = Quantity(
        "angle zero",
        float(np.degrees(r.best.angle_zero)),
        "deg",
        float(np.degrees(r.best.angle_zero_u)),
        plane,
        "angle on the stage's scale about which the fitted pattern is even",
    )
    if r.pivot is None:
        return [zero]
    method = "arrival against angle, linear least squares with a free drift"
    found = [zero]
    for axis, value, applied, variance in (
        ("x", r.pivot.x_m, circumstances.pivot_x_m, r.pivot.covariance[0, 0]),
        ("z", r.pivot.z_m, circumstances.pivot_z_m, r.pivot.covariance[1, 1]),
    ):
        conditions: dict[str, float | str] = {**plane, "axis": axis, "correction_applied_m": applied}
        found.append(Quantity("pivot offset", value, "m", sqrt(float(variance)), conditions, method))
    return found


def fitted_levels(r: PlaneResult, theta: NDArray[np.float64], lines: Sequence[int]) -> NDArray[np.float64]:
    """Fitted pattern in dB re its value at angle zero, shape (angles, lines); lines number the fitted ones."""
    from checks.element import response

    fit = r.best
    columns = []
    for j in lines:
        ka = 2 * np.pi * fit.frequencies_hz[j] / r.speed_m_s * fit.radius_m[j]
        columns.append(response(theta - fit.angle_zero, float(ka), fit.edge))
    with np.errstate(divide="ignore"):
        return np.asarray(20 * np.log10(np.abs(np.stack(columns, axis=1))))
