"""Averaging over a face, the echo-free gate, and widths of beams, against closed forms and published values."""

import numpy as np
import pytest
from scipy.integrate import quad
from scipy.special import j1

from checks.averaging import averaged_share, largest_radius, true_width6
from checks.beam import width_of
from checks.gate import echo_free_s

# Gaussian beam averaged over a centred disc: q = 2a/w6, share of the peak, measured over true -6 dB width
# (two-dimensional quadrature with another program)
GAUSS = [
    (0.05, 0.999137, 1.000432),
    (0.1, 0.996554, 1.001729),
    (0.2, 0.986311, 1.006937),
    (0.3, 0.969549, 1.015688),
    (0.5, 0.918416, 1.044289),
    (1.0, 0.722105, 1.189826),
    (2.0, 0.339077, 1.871147),
]


@pytest.mark.parametrize(("q", "share", "widened"), GAUSS)
def test_share_of_the_peak_in_a_gaussian_beam(q: float, share: float, widened: float) -> None:
    assert averaged_share(q * 1e-3 / 2, 1e-3) == pytest.approx(share, abs=1e-6)
    w = 1e-3 / (2 * np.sqrt(0.3 * np.log(10)))
    a = q * 1e-3 / 2
    direct = quad(lambda r: 2 * r / a**2 * np.exp(-((r / w) ** 2)), 0, a)[0]
    assert averaged_share(a, 1e-3) == pytest.approx(direct, rel=1e-9)


@pytest.mark.parametrize(("q", "share", "widened"), [row for row in GAUSS if row[0] <= 0.5])
def test_width_before_averaging_from_second_moments(q: float, share: float, widened: float) -> None:
    # good to 0.2 % up to q = 0.5
    assert true_width6(widened * 1e-3, q * 1e-3 / 2) == pytest.approx(1e-3, rel=2.2e-3)


@pytest.mark.parametrize(
    ("loss", "q"), [(0.01, 0.17073), (0.02, 0.24226), (0.05, 0.38704), (0.1, 0.55732), (0.2, 0.81977)]
)
def test_largest_radius_for_a_given_loss(loss: float, q: float) -> None:
    assert 2 * largest_radius(1e-3, loss) * 1e3 == pytest.approx(q, abs=1e-5)


# IEC 62127-1, 5.2.2 (read in GOST IEC 62127-1-2015, equation 8): z, tau -> h, at c = 1482.4 m/s
@pytest.mark.parametrize(("z_mm", "tau_us", "h_mm"), [(100, 20, 41.257), (50, 10, 20.629), (200, 50, 93.731)])
def test_echo_free_time_of_a_reflector(z_mm: float, tau_us: float, h_mm: float) -> None:
    assert echo_free_s(z_mm * 1e-3, h_mm * 1e-3, 1482.4) * 1e6 == pytest.approx(tau_us, abs=1e-3)


def test_width_of_a_gaussian_profile() -> None:
    w = 1e-3
    x = np.linspace(-3e-3, 3e-3, 31) + 0.07e-3
    found = width_of(x, np.exp(-(((x - 0.2e-3) / w) ** 2)), np.full(31, 1e-4))
    # exp(-(h/w)²) = 10^(-6/20): full width 2 w sqrt(0.3 ln 10)
    assert found.width_m == pytest.approx(2 * w * np.sqrt(0.3 * np.log(10)), rel=5e-4)
    assert found.peak_m == pytest.approx(0.2e-3, abs=2e-6)


def test_width_of_the_focus_of_a_bowl_is_1_408_wavelengths_times_f_number() -> None:
    # H. T. O'Neil, J. Acoust. Soc. Am. 21, 516 (1949): 2 J1(v)/v across the focus; -6 dB at v = 2.211785,
    # so the full width is 2 x 2.211785/pi = 1.408 wavelengths times the f-number
    wavelength_f = 0.7e-3
    x = np.linspace(-1.5e-3, 1.5e-3, 61)
    v = np.pi * x / wavelength_f
    safe = np.where(v == 0, 1e-12, v)
    profile = np.abs(2 * j1(safe) / safe)
    found = width_of(x, profile, np.full(61, 1e-4))
    assert found.width_m == pytest.approx(1.40807 * wavelength_f, rel=3e-4)
    assert width_of(x, profile, np.full(61, 1e-4), -3.0).width_m == pytest.approx(1.02734 * wavelength_f, rel=3e-4)
