"""Budgets against worked examples of the GUM, tables of Student's t, and closed forms.

JCGM 100:2008, H.1, calibration of an end gauge: inputs read in the public test files of a national laboratory. The
printed results are u_c = 32 nm, 16 degrees of freedom, U99 = 93 nm (2.92 x 32).
"""

from __future__ import annotations

from math import sqrt

import numpy as np
import pytest
from hypothesis import given
from hypothesis import strategies as st
from numpy.typing import NDArray

from checks.errors import MeasurementError
from checks.repeatability import from_repeats
from checks.uncertainty import Budget, Contribution, Distribution, Input, budget_of, drawn, e_n


def end_gauge() -> Budget:
    difference = budget_of(
        "d", "nm", lambda mean, random, systematic: mean + random + systematic,
        {
            "mean": Input(215.0, 5.8, freedom=24),
            "random": Input(0.0, 10 / 2.570582, freedom=5),  # 10 nm at 95 %, t95(5)
            "systematic": Input(0.0, 20 / 3, freedom=8),
        },
    )  # fmt: skip
    assert difference.u == pytest.approx(9.7, abs=0.05)  # printed
    assert difference.freedom == pytest.approx(25.6, abs=0.1)  # printed

    # the deviation of the temperature has a mean of -0.1 °C (u 0.2) and a cycle of half-width 0.5 (arcsine)
    theta = sqrt(0.2**2 + (0.5 / sqrt(2)) ** 2)
    return budget_of(
        "l", "nm",
        lambda l_s, d, alpha_s, theta, d_alpha, d_theta: l_s + d - l_s * (d_alpha * theta + alpha_s * d_theta),
        {
            "l_s": Input(50_000_623.6, 75 / 3, freedom=18),
            "d": Input(215.0, difference.u, freedom=difference.freedom),
            "alpha_s": Input.within(11.5e-6, 2e-6),
            "theta": Input(-0.1, theta),
            "d_alpha": Input.within(0.0, 1e-6, freedom=50),
            "d_theta": Input.within(0.0, 0.05, freedom=2),
        },
    )  # fmt: skip


def test_the_end_gauge_of_the_gum() -> None:
    budget = end_gauge()
    assert budget.value == pytest.approx(50_000_838.6, abs=0.05)
    rows = {row.source: row.u for row in budget.rows}
    # from the unrounded inputs, worked out with another program
    assert rows["l_s"] == pytest.approx(25.0, abs=0.01)
    assert rows["d_alpha"] == pytest.approx(2.887, abs=0.002)
    assert rows["d_theta"] == pytest.approx(16.599, abs=0.002)
    assert rows["alpha_s"] == pytest.approx(0.0, abs=1e-6)  # its partner is zero
    assert budget.u == pytest.approx(31.6556, abs=0.02)
    assert int(budget.freedom) == 16
    assert budget.coverage_factor(0.99) == pytest.approx(2.920782, abs=1e-6)
    assert budget.expanded(0.99) == pytest.approx(93, abs=1)


@pytest.mark.parametrize(
    ("freedom", "factor"),
    [(1, 12.70620), (2, 4.302653), (5, 2.570582), (10, 2.228139), (16, 2.119905), (50, 2.008559), (100, 1.983972)],
)
def test_coverage_factors_are_those_of_students_table(freedom: float, factor: float) -> None:
    # JCGM 100, table G.2, with more digits
    budget = Budget("y", "", 0.0, (Contribution("x", "", Input(0.0, 1.0, freedom=freedom), 1.0),))
    assert budget.coverage_factor(0.95) == pytest.approx(factor, abs=1e-5)


@pytest.mark.parametrize(
    ("x", "u", "ref", "u_ref", "expected"), [(0.102, 0.004, 0.100, 0.003, 0.4), (1.05, 0.03, 1.0, 0.02, 1.386750)]
)
def test_e_n(x: float, u: float, ref: float, u_ref: float, expected: float) -> None:
    assert e_n(x, u, ref, u_ref) == pytest.approx(expected, abs=1e-6)


def total(
    a: NDArray[np.float64], b: NDArray[np.float64], c: NDArray[np.float64], d: NDArray[np.float64]
) -> NDArray[np.float64]:
    return np.asarray(a + b + c + d)


def test_the_sum_of_four_rectangular_inputs() -> None:
    # JCGM 101, 9.2.3: four rectangular distributions of unit standard deviation; u = 2.00 and the shortest 95 %
    # interval is ±3.88 (printed), where the GUM's normal distribution has ±3.92
    inputs = {name: Input(0.0, 1.0, "rectangular") for name in "abcd"}
    found = drawn(total, inputs, 400_000, 5)
    assert found.u == pytest.approx(2.0, abs=0.01)
    assert found.high - found.low == pytest.approx(2 * 3.88, abs=0.04)
    assert budget_of("y", "", lambda a, b, c, d: a + b + c + d, inputs).expanded() == pytest.approx(3.92, abs=0.005)


@pytest.mark.parametrize("distribution", ["normal", "rectangular", "triangular", "arcsine", "t"])
def test_draws_have_the_standard_uncertainty_that_was_given(distribution: Distribution) -> None:
    given_ = Input(3.0, 0.5, distribution, freedom=12 if distribution == "t" else float("inf"))
    values = given_.drawn(np.random.default_rng(1), 200_000)
    assert values.mean() == pytest.approx(3.0, abs=0.01)
    assert values.std() == pytest.approx(0.5, rel=0.01)


@given(st.floats(1e-3, 1e3), st.floats(0.1, 10), st.floats(0.1, 10))
def test_a_change_of_unit_changes_nothing_else(scale: float, u1: float, u2: float) -> None:
    def budget(factor: float) -> Budget:
        inputs = {"a": Input(2.0, u1, freedom=7), "b": Input(1.0, u2, freedom=30)}
        return budget_of("y", "", lambda a, b: factor * (a + 3 * b), inputs)

    one, other = budget(1.0), budget(scale)
    assert other.u == pytest.approx(scale * one.u, rel=1e-6)
    assert other.freedom == pytest.approx(one.freedom, rel=1e-6)
    assert one.u == pytest.approx(np.hypot(u1, 3 * u2), rel=1e-6)


def test_what_is_fully_correlated_adds_without_squares() -> None:
    rows = tuple(Contribution(name, "", Input(0.0, 1.0), 2.0) for name in "ab")
    assert Budget("y", "", 0.0, rows, {("a", "b"): 1.0}).u == pytest.approx(4.0)
    assert Budget("y", "", 0.0, rows, {("a", "b"): -1.0}).u == pytest.approx(0.0)


def test_repeats_give_their_mean_and_its_scatter() -> None:
    # JCGM 100, 4.4.3, table 1: twenty temperatures, mean 100.145 °C, u 0.333 °C (printed)
    readings = [
        96.90, 98.18, 98.25, 98.61, 99.03, 99.49, 99.56, 99.74, 99.89, 100.07,
        100.33, 100.42, 100.68, 100.95, 101.11, 101.20, 101.57, 101.84, 102.36, 102.72,
    ]  # fmt: skip
    found = from_repeats(np.array(readings)).as_input()
    assert found.value == pytest.approx(100.145, abs=5e-4)
    assert found.u == pytest.approx(0.333, abs=5e-4)
    assert found.freedom == 19


@pytest.mark.parametrize(
    "make",
    [
        lambda: Input(1.0, -1.0),
        lambda: Input(float("nan"), 1.0),
        lambda: Input(0.0, 1.0, "t"),
        lambda: Input.within(0.0, 1.0, "normal"),
        lambda: from_repeats(np.array([1.0])),
    ],
)
def test_what_cannot_be_an_input_is_refused(make: object) -> None:
    with pytest.raises(MeasurementError):
        make()  # type: ignore[operator]
