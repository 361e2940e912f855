"""Deconvolution of synthetic records whose pressure is known: recovery, coverage, two routes to the uncertainty."""

from __future__ import annotations

import numpy as np
import pytest
from numpy.typing import NDArray
from scipy.stats import binom

from checks.deconvolution import LowPass, deconvolve, divide_by_one, monte_carlo
from checks.errors import MeasurementError
from checks.sensitivity import Sensitivity, at, sensitivity_of

INTERVAL = 4e-9
N = 400
LENGTH = 1024
LOW = LowPass(40e6, 2)
F = np.linspace(0.0, 125e6, 26)
NOISE_V = 2e-4
GRID = np.asarray(np.fft.rfftfreq(LENGTH, INTERVAL), np.float64)


def table(u: float = 0.03, common: float = 0.0) -> Sensitivity:
    """A resonance near 30 MHz and a delay, as a membrane has."""
    x = F / 30e6
    h = 5e-8 / (1 - x**2 + 0.8j * x)
    return sensitivity_of(F, np.abs(h), np.angle(h), u, u, common)


def truth() -> NDArray[np.float64]:
    t = (np.arange(N) - 150) * INTERVAL
    return np.asarray(1e6 * np.exp(-(t**2) / (2 * (2e-7) ** 2)) * np.cos(2 * np.pi * 5e6 * t))


def through(p: NDArray[np.float64], response: NDArray[np.complex128]) -> NDArray[np.float64]:
    return np.asarray(np.fft.irfft(np.fft.rfft(p, LENGTH) * response, LENGTH)[:N])


def line(t: Sensitivity) -> NDArray[np.complex128]:
    return at(t, GRID).value


def low_passed() -> NDArray[np.float64]:
    return through(truth(), LOW.gain(GRID))


def test_without_noise_the_low_passed_pressure_comes_back() -> None:
    found = deconvolve(through(truth(), line(table())), INTERVAL, 0.0, table(), LOW, LENGTH)
    assert found.pressure_pa == pytest.approx(low_passed(), abs=2e3)
    assert found.outside_share == 0.0
    assert found.phase_known


@pytest.mark.parametrize("common", [0.0, 0.6, 1.0])
def test_intervals_cover_the_truth_as_often_as_they_say(common: float) -> None:
    repeats = 400
    rng = np.random.default_rng(7)
    nominal = table(common=common)
    wanted = low_passed()
    hit = np.zeros(N)
    for _ in range(repeats):
        own = rng.standard_normal((2, F.size))
        shared = rng.standard_normal((2, 1))
        drawn = np.sqrt(common) * shared + np.sqrt(1 - common) * own
        assert nominal.phase_rad is not None
        real = sensitivity_of(
            F, nominal.magnitude_v_per_pa * (1 + 0.03 * drawn[0]), nominal.phase_rad + 0.03 * drawn[1]
        )
        volts = through(truth(), line(real)) + NOISE_V * rng.standard_normal(N)
        found = deconvolve(volts, INTERVAL, NOISE_V, nominal, LOW, LENGTH)
        hit += np.abs(found.pressure_pa - wanted) <= 1.959964 * found.standard_u_pa
    # any of 400 samples out of these bounds by chance: 400 x 2e-6, under 0.1 %
    low, high = (float(binom.ppf(q, repeats, 0.95)) for q in (1e-6, 1 - 1e-6))
    assert low <= hit.min()
    assert hit.max() <= high
    # wholly correlated samples leave 1.1 % on the mean; four of these
    assert hit.mean() / repeats == pytest.approx(0.95, abs=0.044)


@pytest.mark.parametrize("common", [0.0, 1.0])
def test_both_routes_agree(common: float) -> None:
    volts = through(truth(), line(table()))
    direct = deconvolve(volts, INTERVAL, NOISE_V, table(common=common), LOW, LENGTH).standard_u_pa
    drawn = monte_carlo(
        volts, INTERVAL, NOISE_V, table(common=common), LOW, 2000, np.random.default_rng(3), LENGTH
    ).std(axis=0, ddof=1)
    # a standard deviation of 2000 draws is known to 1.6 %; five of these on any sample, 0.5 % of non-linearity
    assert np.abs(drawn / direct - 1).max() < 5 * 0.016 + 0.005


def test_noise_alone_has_the_closed_form_of_a_flat_response() -> None:
    flat = sensitivity_of(F, np.full(F.size, 5e-8), np.zeros(F.size))
    wide = LowPass(1e15, 1)
    found = deconvolve(through(truth(), line(flat)), INTERVAL, NOISE_V, flat, wide, LENGTH)
    assert found.noise_u_pa == pytest.approx(NOISE_V / 5e-8)
    assert found.pressure_pa == pytest.approx(divide_by_one(through(truth(), line(flat)), flat, 5e6), abs=1.0)


def test_what_lies_outside_the_table_is_told_as_a_share_of_the_energy() -> None:
    short = sensitivity_of(np.array([6e6, 50e6]), np.full(2, 5e-8))
    found = deconvolve(truth() * 5e-8, INTERVAL, 0.0, short, LowPass(1e12, 1), LENGTH)
    # |P|² is Gaussian in frequency, standard deviation 1/(2 sqrt2 pi s) = 0.563 MHz about 5 MHz: below 6 MHz 96 %
    assert found.outside_share == pytest.approx(0.962, abs=0.01)
    assert not found.phase_known
    with pytest.raises(MeasurementError, match="outside the sensitivity table; allowed: 6e"):
        divide_by_one(truth(), short, 5e6)


def test_the_corner_is_where_each_order_takes_3_db() -> None:
    for order in (1, 2, 4):
        assert np.abs(LowPass(1e7, order).gain(np.array([1e7])))[0] == pytest.approx(2 ** (-order / 2))
    assert LowPass(1e7, 2, zero_phase=True).gain(np.array([3e7]))[0].imag == 0


def test_what_cannot_be_is_refused() -> None:
    for volts, interval, noise, length in (
        (np.zeros(1), 1e-9, 0.0, None),
        (np.array([0.0, np.nan]), 1e-9, 0.0, None),
        (np.zeros(9), 0.0, 0.0, None),
        (np.zeros(9), 1e-9, -1.0, None),
        (np.zeros(9), 1e-9, 0.0, 8),
    ):
        with pytest.raises(MeasurementError, match="deconvolution"):
            deconvolve(volts, interval, noise, table(), LOW, length)
    with pytest.raises(MeasurementError, match="low-pass"):
        LowPass(0.0)
