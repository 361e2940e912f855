"""Averaging of piston beams, planes, foci and the size criterion, against closed forms and other programs."""

from __future__ import annotations

import numpy as np
import pytest
from numpy.typing import NDArray
from scipy.special import j1

from checks.averaging import averaged, radius_by_criterion, widened
from checks.averaging_bias import gaussian_bias
from checks.beam_axis import axis_of, focus_of
from checks.beam_plane import plane_integral, shape_of
from checks.beam_profile import Profile, fit_profile

Vector = NDArray[np.float64]
X6 = 2.211785445  # 2 J1(x)/x is -6 dB there
# q = 2a/w6, share of the peak and measured over true -6 dB width, by two-dimensional quadrature with another program
GAUSS = [(0.1, 0.996554, 1.001729), (0.3, 0.969549, 1.015688), (0.5, 0.918416, 1.044289), (1.0, 0.722105, 1.189826)]
PISTON = [(0.1, 0.996947, 1.000573), (0.3, 0.972817, 1.005232), (0.5, 0.926110, 1.014972), (0.8, 0.820531, 1.041350)]
W6 = 1e-3


def piston(r: Vector) -> Vector:
    """Amplitude across the focus of a circular source whose -6 dB width is `W6` (H. T. O'Neil 1949)."""
    v = 2 * X6 * np.maximum(np.abs(r), 1e-12) / W6
    return np.asarray(2 * j1(v) / v)


@pytest.mark.parametrize(("q", "share", "wider"), GAUSS)
def test_width_that_an_element_measures_of_a_gaussian_beam(q: float, share: float, wider: float) -> None:
    assert widened(q * W6 / 2, W6) / W6 == pytest.approx(wider, abs=1.5e-6)
    assert gaussian_bias(q * W6 / 2, wider * W6) == pytest.approx((share, wider), abs=2e-6)


@pytest.mark.parametrize(("q", "share", "wider"), PISTON)
def test_the_focus_of_a_circular_source_averaged_over_a_disc(q: float, share: float, wider: float) -> None:
    a = q * W6 / 2
    assert averaged(piston, a, np.zeros(1))[0] == pytest.approx(share, abs=2e-6)
    half = np.linspace(0.45, 0.6, 3001) * W6
    read = averaged(piston, a, half) / share
    assert 2 * float(np.interp(-(10**-0.3), -read, half)) / W6 == pytest.approx(wider, abs=3e-5)


@pytest.mark.parametrize(("q", "share", "wider"), GAUSS)
def test_the_true_profile_is_found_of_a_gaussian_beam(q: float, share: float, wider: float) -> None:
    x = np.linspace(-2e-3, 2e-3, 41)
    y = averaged(lambda r: np.exp(-(r**2) * 4 * 0.3 * np.log(10) / W6**2), q * W6 / 2, np.abs(x))
    found = fit_profile(x, y, np.full(41, 1e-4), q * W6 / 2)
    assert (found.share, found.widening) == pytest.approx((share, wider), abs=1e-5)
    assert found.profile.b == pytest.approx(0, abs=1e-4)


@pytest.mark.parametrize(("q", "share", "wider"), [row for row in PISTON if row[0] <= 0.5])
def test_the_true_profile_is_found_of_the_focus_of_a_circular_source(q: float, share: float, wider: float) -> None:
    x = np.linspace(-2e-3, 2e-3, 41) + 2e-5
    found = fit_profile(x, np.abs(averaged(piston, q * W6 / 2, np.abs(x))), np.full(41, 1e-4), q * W6 / 2)
    # of the loss 2 %, of the widening an eighth; a Gaussian beam of that width would be widened three times as much
    assert 1 - found.share == pytest.approx(1 - share, rel=0.02)
    assert found.widening - 1 == pytest.approx(wider - 1, rel=0.125)


def test_the_family_of_profiles_holds_the_beam_of_a_circular_source() -> None:
    # u = v²/8; the logarithm of 2 J1(v)/v by its Rayleigh sums to the eighth order
    v = np.linspace(0.01, 2.3, 50)
    assert Profile(np.sqrt(8.0), 1.0).at(v) == pytest.approx(2 * j1(v) / v, rel=4e-3)


# f in MHz, a1, l and a_max in mm, c = 1482.4 m/s: worked out with another program from the form from memory
@pytest.mark.parametrize(
    ("f", "a1", "distance", "largest"),
    [
        (5, 10, 40, 0.152802),
        (1, 10, 60, 1.127136),
        (5, 5, 84.25, 0.625560),
        (10, 6.35, 25, 0.075269),
        (40, 3, 9, 0.014649),
    ],
)
def test_largest_radius_by_the_criterion(f: float, a1: float, distance: float, largest: float) -> None:
    found = radius_by_criterion(1482.4 / (f * 1e6), a1 * 1e-3, distance * 1e-3)
    assert found * 1e3 == pytest.approx(largest, abs=1e-6)


def test_the_criterion_lets_3_8_per_cent_of_the_peak_be_lost() -> None:
    # far away it says k a1 a/l = pi/4, where 4 (1 - J0(x))/x² is 0.9621 (derived; by quadrature here)
    lost = 1 - averaged(lambda r: 2 * j1(np.maximum(r, 1e-9)) / np.maximum(r, 1e-9), np.pi / 4, np.zeros(1))[0]
    assert lost == pytest.approx(0.0379, abs=1e-4)


@pytest.mark.parametrize("turn", [-1.2, 0.0, 0.4, 1.5])
def test_area_ellipticity_and_direction_of_an_elliptic_gaussian_beam(turn: float) -> None:
    # amplitude exp(-u²/A² - v²/B²) is -6 dB on an ellipse with semi-axes A, B times sqrt(0.3 ln 10)
    x, y = np.linspace(-3e-3, 3e-3, 31), np.linspace(-2.8e-3, 3.2e-3, 31)
    gx, gy = np.meshgrid(x - 0.13e-3, y + 0.2e-3)
    u, v = gx * np.cos(turn) + gy * np.sin(turn), -gx * np.sin(turn) + gy * np.cos(turn)
    a, b = 1.4e-3, 0.9e-3
    found = shape_of(x, y, np.exp(-((u / a) ** 2) - (v / b) ** 2))
    r6 = np.sqrt(0.3 * np.log(10))
    assert found.area_m2 == pytest.approx(np.pi * a * b * r6**2, rel=1e-3)
    assert (found.major_m, found.minor_m) == pytest.approx((2 * a * r6, 2 * b * r6), rel=1e-3)
    assert found.ellipticity == pytest.approx(b / a, rel=1e-3)
    assert found.centroid_m == pytest.approx((0.13e-3, -0.2e-3), abs=1e-6)
    assert found.orientation == pytest.approx(turn, abs=2e-3)


def test_integral_of_a_gaussian_beam_over_a_plane() -> None:
    # of exp(-2 r²/w²): pi w²/2
    x = np.linspace(-4e-3, 4e-3, 41)
    square = np.exp(-2 * (x[:, None] ** 2 + x**2) / 1e-6)
    found, u = plane_integral(x, x, square, np.full(square.shape, 1e-3))
    assert found == pytest.approx(np.pi / 2 * 1e-6, rel=1e-6)
    # every point counts for a cell of 0.2 mm by 0.2 mm
    assert u == pytest.approx(1e-3 * 40 * 4e-8, rel=0.02)


# bowls: f, R, a, place of the peak on the axis, -6 dB length; all mm and MHz, c = 1482.4 m/s. Numbers from the Rayleigh
# integral over the bowl with another program; the axis itself below is H. T. O'Neil's closed form (1949)
BOWLS = [
    (1, 60, 20, 57.0393, 29.7140),
    (5, 40, 10, 39.3715, 11.0872),
    (5, 30, 15, 29.9510, 2.6632),
    (5, 30, 5, 26.5397, 22.1114),
    (10, 25, 6.35, 24.7598, 5.3994),
]


@pytest.mark.parametrize(("f", "radius", "a", "peak", "length"), BOWLS)
def test_focal_distance_and_depth_of_a_bowl(f: float, radius: float, a: float, peak: float, length: float) -> None:
    k, h = 2 * np.pi * f / 1.4824, radius - np.sqrt(radius**2 - a**2)

    def on_axis(z: Vector) -> Vector:
        return np.asarray(np.abs(2 / (1 - z / radius) * np.sin(k * (np.hypot(z - h, a) - z) / 2)))

    fine = np.linspace(0.85 * radius, 0.99999 * radius, 100_001)
    top = float(fine[np.argmax(on_axis(fine))])
    assert top == pytest.approx(peak, abs=3e-3)
    z = np.linspace(peak - 0.8 * length, peak + 1.2 * length, 61)
    found = focus_of(z * 1e-3, on_axis(z), 1e-4 * on_axis(z))
    assert found.distance_m * 1e3 == pytest.approx(top, abs=2e-3 * length)
    assert abs(found.distance_m * 1e3 - top) < 3 * found.distance_u_m * 1e3
    assert found.depth_m * 1e3 == pytest.approx(length, rel=3e-3)
    # it lies between the bowl and its centre, as O'Neil says
    assert found.distance_m < radius * 1e-3


def test_tilt_of_a_beam_that_is_known() -> None:
    z = np.linspace(0.05, 0.12, 8)
    found = axis_of(z, 1e-4 + z * np.tan(0.01), -2e-4 - z * np.tan(0.004), np.full(8, 1e-6), np.full(8, 1e-6))
    assert (found.x_m, found.y_m) == pytest.approx((1e-4, -2e-4), abs=1e-9)
    assert (found.tilt_x, found.tilt_y) == pytest.approx((0.01, -0.004), abs=1e-9)
    assert np.tan(found.tilt) == pytest.approx(np.hypot(np.tan(0.01), np.tan(0.004)))
    # slope of a straight line: sigma over the root of the sum of squares about the middle
    assert found.tilt_x_u == pytest.approx(1e-6 / np.sqrt(np.sum((z - z.mean()) ** 2)), rel=1e-3)
