"""Curvature of the wave of a circular source, against the Rayleigh integral added up over its face."""

import numpy as np
import pytest
from numpy.typing import NDArray

from checks.observation import Circumstances
from checks.wavefront import WATER_M_S, curvature
from tests.checks.synthetic import circumstances


def rayleigh(c: Circumstances, x: NDArray[np.float64]) -> NDArray[np.complex128]:
    """Pressure at (x, 0, distance), any scale; the face a bowl where the source is focused, its middle at 0."""
    k = 2 * np.pi * c.drive_hz / WATER_M_S
    nodes, weights = np.polynomial.legendre.leggauss(160)
    r, w = c.source_radius_m * (nodes + 1) / 2, weights * c.source_radius_m / 2
    around = (np.arange(240) + 0.5) * 2 * np.pi / 240
    bowl = c.focal_length_m
    z = np.zeros_like(r) if bowl is None else bowl - np.sqrt(bowl**2 - r**2)
    stretch = np.ones_like(r) if bowl is None else bowl / np.sqrt(bowl**2 - r**2)
    found = []
    for at in x:
        d = np.sqrt((np.outer(r, np.cos(around)) - at) ** 2 + np.outer(r, np.sin(around)) ** 2)
        d = np.hypot(d, (c.distance_m - z)[:, None])
        found.append(np.sum((w * r * stretch)[:, None] * np.exp(-1j * k * d) / d))
    return np.array(found)


@pytest.mark.parametrize(
    ("radius_mm", "mhz", "distance_mm", "focus_mm"),
    [
        (6, 2.25, 120, None),
        (6, 2.25, 70, None),
        (6, 2.25, 400, None),
        (3, 5, 80, None),
        (10, 3, 40, 40),
        (10, 3, 42, 40),
        (10, 3, 39, 40),
        (6, 2.25, 120, 150),
    ],
)
def test_curvature_is_that_of_the_field_added_up(
    radius_mm: float, mhz: float, distance_mm: float, focus_mm: float | None
) -> None:
    c = circumstances(
        drive_hz=mhz * 1e6,
        distance_m=distance_mm * 1e-3,
        source_radius_m=radius_mm * 1e-3,
        focal_length_m=None if focus_mm is None else focus_mm * 1e-3,
    )
    x = np.linspace(0, 0.1, 5) * WATER_M_S / c.drive_hz * c.distance_m / c.source_radius_m
    phase = np.unwrap(np.angle(rayleigh(c, x)))
    later = (phase[0] - phase) / (2 * np.pi * c.drive_hz / WATER_M_S)  # metres of path: x²/(2 R)
    bent = 2 * np.polyfit(x**2, later, 2)[1]
    # the formula is paraxial, to second order in a/z, and a/z is up to 1/4 here: parts of 1/16 are left out
    assert curvature(c) * c.distance_m == pytest.approx(bent * c.distance_m, abs=0.063)


def test_far_away_it_is_a_sphere_and_at_the_last_maximum_a_plane() -> None:
    assert curvature(circumstances(distance_m=5.0)) == pytest.approx(1 / 5.0, rel=1e-3)
    last = 6e-3**2 * 2.25e6 / WATER_M_S  # a²/lambda
    assert curvature(circumstances(distance_m=last)) * last == pytest.approx(0.0, abs=1e-9)


def test_in_the_focal_plane_the_wave_is_a_sphere_about_the_middle_of_the_source() -> None:
    # H. T. O'Neil, J. Acoust. Soc. Am. 21, 516 (1949): k h 2 J1(y)/y times a phase k r²/(2 R)
    at = circumstances(drive_hz=3e6, distance_m=0.04, source_radius_m=0.01, focal_length_m=0.04)
    assert curvature(at) == pytest.approx(1 / 0.04, rel=1e-9)


def test_between_nulls_of_a_near_field_it_stays_within_bounds() -> None:
    for distance in np.linspace(5e-3, 0.05, 200):
        assert abs(curvature(circumstances(distance_m=float(distance)))) * distance <= 2.0
