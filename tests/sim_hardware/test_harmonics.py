"""Harmonics of a steepening plane wave."""

import numpy as np
import pytest
from scipy.optimize import brentq
from scipy.special import jv

from sim_hardware.harmonics import harmonic_amplitudes

# Blackstock 1966, the bridging function, computed independently and checked against the implicit waveform.
TABLE = {
    0.5: (0.96907383, 0.22980697, 0.08128527, 0.03399572, 0.01560130, 0.00058712),
    1.0: (0.88010117, 0.35283403, 0.20604181, 0.14056453, 0.10445622, 0.04149722),
    2.0: (0.64718499, 0.31095411, 0.20454289, 0.15246494, 0.12156579, 0.06046348),
    5.0: (0.33228090, 0.16551009, 0.11024689, 0.08265936, 0.06611772, 0.03305222),
}


@pytest.mark.parametrize("sigma", TABLE)
def test_amplitudes_are_those_of_the_bridging_function(sigma: float) -> None:
    found = harmonic_amplitudes(sigma, 10)[[0, 1, 2, 3, 4, 9]]
    np.testing.assert_allclose(found, TABLE[sigma], rtol=0, atol=2e-8)


@pytest.mark.parametrize("sigma", [0.1, 0.5, 0.99])
def test_before_the_shock_they_are_fubinis(sigma: float) -> None:
    n = np.arange(1, 19)
    np.testing.assert_allclose(harmonic_amplitudes(sigma, 18), 2 * jv(n, n * sigma) / (n * sigma), atol=1e-10)


def test_after_the_shock_they_are_the_series_of_the_implicit_wave() -> None:
    sigma = 1.6
    shock = brentq(lambda p: p - sigma * np.sin(p), 0.1, 3)
    phi = np.linspace(shock, np.pi, 20_001)
    theta = phi - sigma * np.sin(phi)
    expected = [2 / np.pi * np.trapezoid(np.sin(phi) * np.sin(n * theta), theta) for n in range(1, 8)]
    np.testing.assert_allclose(harmonic_amplitudes(sigma, 7), expected, atol=1e-6)


def test_without_steepening_there_is_only_the_fundamental() -> None:
    np.testing.assert_array_equal(harmonic_amplitudes(0.0, 4), [1, 0, 0, 0])


def test_a_sawtooth_remains_far_beyond_the_shock() -> None:
    # Lossless limit 2 / (n (1 + sigma)) of Fay's series, within a few per cent at sigma 10.
    n = np.arange(1, 11)
    np.testing.assert_allclose(harmonic_amplitudes(10.0, 10), 2 / (11 * n), rtol=0.01)
