"""The part of the report that shows a rotation."""

from __future__ import annotations

from collections.abc import Sequence
from math import pi

import numpy as np
from numpy.typing import NDArray

from acquire.report import figures
from acquire.report.page import Picture, picture, section
from acquire.results.rotation import fitted_levels
from checks.rotation_fit import PlaneResult, edge_words

FIRST_NULLS = (3.83170597, 7.01558667, 10.17346814)  # of J1
CURVES = 5


def sections(results: Sequence[PlaneResult], nominal_mm: float) -> list[str]:
    """One section for each plane."""
    found = []
    for r in results:
        name = f"Plane at {np.degrees(r.response.phi):g}°" if len(results) > 1 else "Directional response"
        pictures = [_response(r), _surface(r), _radius(r, nominal_mm), _peaks(r)]
        if r.pivot is not None:
            pictures.append(_arrival(r))
        found.append(section(name, *(picture(p) for p in pictures)))
    return found


def _response(r: PlaneResult) -> Picture:
    """A few frequencies spread over the usable ones, with the fitted pattern."""
    fitted = np.arange(r.best.frequencies_hz.size)
    chosen = fitted[:: max(1, (fitted.size - 1) // (CURVES - 1))][:CURVES]
    lines = [int(np.argmin(np.abs(r.response.frequencies_hz - r.best.frequencies_hz[j]))) for j in chosen]
    theta = np.linspace(r.response.theta.min(), r.response.theta.max(), 721)
    figure = figures.response_against_angle(
        np.degrees(r.response.theta),
        r.response.frequencies_hz[lines] / 1e6,
        r.fitted.level_db()[:, lines],
        np.degrees(theta),
        fitted_levels(r, theta, chosen.tolist()),
    )
    known = "" if r.edge_is_known else " The data do not tell the edge behaviours apart."
    caption = f"Directional response (dots) and fitted pattern (lines), {edge_words(r.best.edge)}.{known}"
    return Picture(caption, figures.png(figure))


def _surface(r: PlaneResult) -> Picture:
    lines = np.nonzero(r.response.usable)[0]
    frequency = r.response.frequencies_hz[lines]
    loci = null_loci(r, float(frequency.min()), float(frequency.max()))
    figure = figures.response_surface(
        np.degrees(r.response.theta), frequency / 1e6, np.nan_to_num(r.fitted.level_db()[:, lines], nan=-99.0), loci
    )
    return Picture("Response over angle and frequency; dashed: nulls of the fitted element.", figures.png(figure))


def null_loci(r: PlaneResult, low_hz: float, high_hz: float) -> list[tuple[NDArray[np.float64], NDArray[np.float64]]]:
    """Curves (angle in degrees, frequency in MHz) on which the fitted element hears nothing."""
    fit = r.best
    frequency = np.linspace(low_hz, high_hz, 400)
    radius = np.interp(frequency, fit.frequencies_hz, fit.radius_m)
    found = []
    for root in FIRST_NULLS:
        sine = root * r.speed_m_s / (2 * pi * frequency * radius)
        for side in (-1, 1):
            theta = fit.angle_zero + side * np.arcsin(np.where(sine < 1, sine, np.nan))
            inside = (theta > r.response.theta.min()) & (theta < r.response.theta.max())
            if inside.sum() > 1:
                found.append((np.degrees(theta[inside]), frequency[inside] / 1e6))
    return found


def _radius(r: PlaneResult, nominal_mm: float) -> Picture:
    fit = r.best
    by = {a.frequency_hz: a for a in r.by_angles}
    angles = [by.get(float(f)) for f in fit.frequencies_hz]
    mean = np.array([a.mean_m if a is not None and a.mean_m is not None else np.nan for a in angles])
    u = np.array([(a.standard_uncertainty_m or 0.0) if a is not None else 0.0 for a in angles])
    law = None
    if r.law is not None:
        frequency = np.linspace(fit.frequencies_hz.min(), fit.frequencies_hz.max(), 200)
        radius, radius_u = r.law.at(frequency)
        law = (frequency / 1e6, radius * 1e3, radius_u * 1e3)
    figure = figures.radius_against_frequency(
        fit.frequencies_hz / 1e6,
        (fit.radius_m * 1e3, fit.radius_u_m * 1e3),
        (mean * 1e3, u * 1e3),
        nominal_mm,
        law,
    )
    caption = f"Effective radius against frequency with standard uncertainty; fit: {edge_words(fit.edge)}."
    return Picture(caption, figures.png(figure))


def _peaks(r: PlaneResult) -> Picture:
    p = r.response
    figure = figures.peaks_against_angle(
        np.degrees(p.theta), p.peak_v / p.reference_peak_v, p.trough_v / p.reference_trough_v
    )
    return Picture(
        "Positive and negative peak against angle: high frequencies live in the positive one.", figures.png(figure)
    )


def _arrival(r: PlaneResult) -> Picture:
    p, pivot = r.response, r.pivot
    if pivot is None:
        raise ValueError("no pivot was fitted")
    theta = np.linspace(p.theta.min(), p.theta.max(), 400)
    rows = p.arrival_usable
    figure = figures.arrival_against_angle(
        np.degrees(p.theta[rows]),
        r.centre_s[rows] * 1e9,
        np.degrees(theta),
        pivot.arrival_at(theta, r.speed_m_s) * 1e9,
    )
    caption = (
        f"Arrival against angle, without drift and bend of the wave, and the fitted pivot offset: "
        f"x = {pivot.x_m * 1e3:.3f} mm, z = {pivot.z_m * 1e3:.3f} mm."
    )
    return Picture(caption, figures.png(figure))
