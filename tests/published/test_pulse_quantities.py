"""Closed forms and values worked out by another program for the quantities of a pulse."""

from __future__ import annotations

import numpy as np
import pytest

from checks.errors import MeasurementError
from checks.pulse import Medium, mechanical_index, pulse_of, pulse_uncertainty

DT = 1e-9
WATER = Medium(998.207, 1482.35, 1e3, 0.05)

# Gaussian bursts p0 exp(-t²/2s²) cos(wt + phi): integral, duration, working frequency and peaks by quadrature with
# another program. Narrow bands: duration 2.26548 s, see below.
GAUSSIAN = [
    (1e6, 3e6, 3e-7, 0.0, 265868.0, 7.40879e-7, 2999999.0, 1e6, 861010.8),
    (1e6, 5e6, 2e-7, 0.0, 177245.0, 4.77883e-7, 4999996.0, 1e6, 885223.7),
    (2e6, 1e7, 1e-7, 0.0, 354491.0, 2.38941e-7, 1.000002e7, 2e6, 1770447.0),
    (1e6, 5e6, 5e-8, 0.0, 48069.2, 6.3123e-8, 4741294.0, 1e6, 229661.9),
    (1e6, 5e6, 5e-8, np.pi / 2, 40553.5, 1.32693e-7, 5153843.0, 698258.7, 698258.7),
]


@pytest.mark.parametrize(("p0", "f", "s", "phase", "ppsi", "td", "fawf", "up", "down"), GAUSSIAN)
def test_gaussian_bursts(
    p0: float, f: float, s: float, phase: float, ppsi: float, td: float, fawf: float, up: float, down: float
) -> None:
    t = (np.arange(6000) - 3000) * DT
    found = pulse_of(p0 * np.exp(-(t**2) / (2 * s**2)) * np.cos(2 * np.pi * f * t + phase), DT, WATER)
    assert found.square_integral_pa2s == pytest.approx(ppsi, rel=1e-5)
    assert found.duration_s == pytest.approx(td, rel=1e-3)
    assert found.working_hz == pytest.approx(fawf, rel=2e-4)
    assert (found.positive_peak_pa, found.negative_peak_pa) == pytest.approx((up, down), rel=1e-5)


@pytest.mark.parametrize(
    ("cycles", "f", "ppsi", "td"), [(3, 5e6, 3e-7, 6.12395e-7), (10, 5e6, 1e-6, 2e-6), (2, 1e6, 1e-6, 1.93802e-6)]
)
def test_whole_cycles_of_a_sine(cycles: int, f: float, ppsi: float, td: float) -> None:
    t = (np.arange(6000) - 1000) * DT
    found = pulse_of(np.where((t >= 0) & (t < cycles / f), np.sin(2 * np.pi * f * t), 0.0), DT, WATER)
    assert found.square_integral_pa2s == pytest.approx(ppsi, rel=1e-4)
    assert found.duration_s == pytest.approx(td, rel=1e-3)
    assert found.crossing_hz == pytest.approx(f, rel=1e-6)


@pytest.mark.parametrize(
    ("down", "f", "z_cm", "derated", "mi"),
    [(2e6, 3e6, 5, 1.1913243e6, 0.6878114), (1e6, 5e6, 3, 0.5956621e6, 0.2663882), (3e6, 2.5e6, 7, None, 1.0366956)],
)
def test_derating_and_mechanical_index(down: float, f: float, z_cm: float, derated: float | None, mi: float) -> None:
    # 0.3 dB/(cm MHz) on pressure as 20 log10 (IEC 62359, from memory); numbers worked out by another program
    weaker = down * 10 ** (-3e-5 * f * z_cm * 1e-2 / 20)
    assert derated is None or weaker == pytest.approx(derated, rel=1e-6)
    assert mechanical_index(weaker, f) == pytest.approx(mi, rel=1e-6)


def test_intensities_of_a_worked_pulse() -> None:
    t = (np.arange(6000) - 3000) * DT
    found = pulse_of(1e6 * np.exp(-(t**2) / (2 * 3e-7**2)) * np.cos(2 * np.pi * 3e6 * t), DT, WATER)
    assert found.pulse_intensity_integral_j_m2 == pytest.approx(0.1796780, rel=1e-5)
    assert found.temporal_average_w_m2 == pytest.approx(179.67797, rel=1e-5)
    assert found.derated_temporal_average_w_m2 == pytest.approx(63.75215, rel=1e-4)
    assert found.pulse_average_w_m2 == pytest.approx(0.1796780 / 7.40879e-7, rel=1e-3)
    assert found.derated_negative_peak_pa == pytest.approx(861010.8 * 0.5956621, rel=1e-4)
    assert found.mechanical_index == pytest.approx(0.8610108 * 0.5956621 / np.sqrt(3), rel=1e-4)


def test_one_factor_in_common_gives_the_powers_of_it() -> None:
    t = (np.arange(2000) - 1000) * DT
    p = 1e6 * np.exp(-(t**2) / (2 * 2e-7**2)) * np.cos(2 * np.pi * 5e6 * t)
    factors = 1 + 0.01 * np.random.default_rng(2).standard_normal(400)
    u, value = pulse_uncertainty(factors[:, None] * p, DT, WATER), pulse_of(p, DT, WATER)
    # p is proportional to the factor, its square integral to the square; 400 draws: 3.5 % on u, four of these
    assert u.positive_peak_pa / value.positive_peak_pa == pytest.approx(0.01, rel=0.14)
    assert u.square_integral_pa2s / value.square_integral_pa2s == pytest.approx(0.02, rel=0.14)
    assert u.working_hz < 1e-6 * value.working_hz


def test_nothing_in_the_gate_is_refused() -> None:
    for record in (np.zeros(100), np.ones(3), np.full(100, np.nan)):
        with pytest.raises(MeasurementError, match="pulse"):
            pulse_of(record, DT, WATER)
    with pytest.raises(MeasurementError, match="50"):
        pulse_uncertainty(np.ones((10, 100)), DT, WATER)
