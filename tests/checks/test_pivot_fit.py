"""The pivot fit: any offset, any order, bad arrivals, too few angles; and the words of sizes."""

import numpy as np
import pytest
from hypothesis import given, settings
from hypothesis import strategies as st
from numpy.typing import NDArray
from scipy import stats

from checks.pivot import PivotFit, fit_pivot
from checks.wording import decibel, deg, mhz, mm, rounded
from tests.checks.synthetic import DISTANCE_M, SPEED, rotation_angles

THETA = rotation_angles(80, 1.0)
ORDER = np.arange(THETA.size)
SIGMA = np.full(THETA.size, 1e-10)


def arrivals(x: float, z: float, drift_s: float = 0.0, seed: int | None = None) -> NDArray[np.float64]:
    noise = 0.0 if seed is None else np.random.default_rng(seed).normal(0, 1e-10, THETA.size)
    along = z * np.cos(THETA) - x * np.sin(THETA)
    return np.asarray((DISTANCE_M + along) / SPEED + drift_s * ORDER / ORDER.size + noise)


@settings(max_examples=60, deadline=None)
@given(st.floats(-2e-3, 2e-3), st.floats(-2e-3, 2e-3), st.floats(-1e-8, 1e-8), st.integers(0, 2**32 - 1))
def test_any_offset_is_recovered_beside_any_drift(x: float, z: float, drift: float, seed: int) -> None:
    found = fit_pivot(THETA, arrivals(x, z, drift, seed), SIGMA, ORDER, SPEED)
    assert found is not None
    distance = np.array([found.x_m - x, found.z_m - z])
    assert distance @ np.linalg.solve(found.covariance, distance) < 30  # chi-squared, 2: one in three million


@settings(max_examples=30, deadline=None)
@given(st.permutations(range(THETA.size)))
def test_the_order_of_the_list_does_not_matter(order: list[int]) -> None:
    t = arrivals(3e-4, -2e-4, 1e-9, 5)
    one = fit_pivot(THETA, t, SIGMA, ORDER, SPEED)
    other = fit_pivot(THETA[order], t[order], SIGMA, ORDER[order], SPEED)
    assert one is not None
    assert other is not None
    assert (other.x_m, other.z_m) == pytest.approx((one.x_m, one.z_m), abs=1e-10)


def test_a_few_wild_arrivals_are_left_out() -> None:
    t = arrivals(3e-4, -2e-4, seed=6)
    t[[7, 30, 55]] += [4e-8, -2e-7, 4e-7]
    found = fit_pivot(THETA, t, SIGMA, ORDER, SPEED)
    assert found is not None
    assert found.points == THETA.size - 3
    assert (found.x_m, found.z_m) == pytest.approx((3e-4, -2e-4), abs=2e-6)


def test_larger_scatter_than_stated_widens_the_uncertainty() -> None:
    wild = arrivals(0, 0) + np.random.default_rng(8).normal(0, 1e-9, THETA.size)
    calm = arrivals(0, 0, seed=8)
    a, b = (fit_pivot(THETA, t, SIGMA, ORDER, SPEED) for t in (wild, calm))
    assert a is not None
    assert b is not None
    assert np.sqrt(a.covariance[0, 0] / b.covariance[0, 0]) == pytest.approx(10, rel=0.2)
    assert a.residual_sd_s == pytest.approx(1e-9, rel=0.2)


def test_angles_that_do_not_determine_it_give_none() -> None:
    fit = PivotFit(SPEED, DISTANCE_M, 10)
    for order in range(20):
        assert fit.estimate() is None
        fit.add(0.0, 8e-5, 1e-10, order)
    assert fit.estimate() is None
    assert fit_pivot(THETA[:3], arrivals(0, 0)[:3], SIGMA[:3], ORDER[:3], SPEED) is None


def test_the_expectation_of_one_more_arrival_scatters_as_it_says() -> None:
    pulls = []
    for seed in range(300):
        t = arrivals(3e-4, -2e-4, 1e-9, seed)
        fit = PivotFit(SPEED, DISTANCE_M, ORDER.size)
        for i in range(30):
            fit.add(float(THETA[i]), float(t[i]), 1e-10, i)
        estimate = fit.estimate()
        assert estimate is not None
        expected, spread = estimate.expected(fit.row(float(THETA[30]), 30))
        pulls.append((t[30] - expected) / spread)
    # Student's t with 26 degrees of freedom: standard deviation 1.04; 300 draws know it to 4 %
    assert np.std(pulls) == pytest.approx(1.04, abs=0.16)


def test_the_statistic_of_a_centred_element_is_hotellings() -> None:
    # e' C^-1 e / 2 is F with 2 and n - 4 degrees of freedom when noise is white and its size is taken from residuals
    theta, statistics = THETA[:24], []
    for seed in range(500):
        t = np.random.default_rng(seed).normal(8e-5, 1e-9, theta.size)
        found = fit_pivot(theta, t, np.full(theta.size, 1e-12), ORDER[:24], SPEED)
        if found is None or found.points < theta.size:  # one beyond five standard deviations was left out
            continue
        e = np.array([found.x_m, found.z_m])
        statistics.append(float(e @ np.linalg.solve(found.covariance, e)) / 2)
    assert len(statistics) > 450
    assert stats.kstest(statistics, stats.f(2, theta.size - 4).cdf).pvalue > 1e-3


@pytest.mark.parametrize(
    ("said", "words"),
    [
        (rounded(1.23456, 0.0123), "1.235 ± 0.012"),
        (rounded(123.456, 12.3), "123 ± 12"),
        (rounded(1.23456, 0.0), "1.23"),
        (rounded(1.23456, float("inf")), "1.23"),
        (mm(1.5e-4, 2.5e-6), "0.1500 ± 0.0025 mm"),
        (deg(np.radians(0.8), np.radians(0.031)), "0.800 ± 0.031°"),
        (decibel(0.0834), "0.083 dB"),
        (decibel(-12.34), "-12.3 dB"),
        (mhz(2.25e6), "2.25 MHz"),
    ],
)
def test_numbers_are_said_to_two_digits_of_their_uncertainty(said: str, words: str) -> None:
    # two digits of the uncertainty: JCGM 100:2008, 7.2.6
    assert said == words
