"""Type A evaluation and the validation of the GUM's interval, against the examples of the guides."""

from __future__ import annotations

from math import sqrt

import numpy as np
import pytest

from checks.repeatability import from_revisits, from_visits
from checks.uncertainty import Input, budget_of, drawn, tolerance, validated


def test_calibration_line_of_a_thermometer() -> None:
    # JCGM 100, H.3 (data from memory; they give the printed results): corrections about 20 °C, y1 = -0.1712 +- 0.0029,
    # y2 = 0.00218 +- 0.00067, s = 0.0035; at 30 °C -0.1494 +- 0.0041
    t = np.array([21.521, 22.012, 22.512, 23.003, 23.507, 23.999, 24.513, 25.002, 25.503, 26.010, 26.511])
    b = np.array([-0.171, -0.169, -0.166, -0.159, -0.164, -0.165, -0.156, -0.157, -0.159, -0.161, -0.160])
    line = from_revisits(b, t)
    assert (line.drift, line.drift_u) == pytest.approx((0.00218, 0.00067), abs=6e-6)
    assert line.deviation == pytest.approx(0.0035, abs=5e-5)
    assert line.degrees_of_freedom == 9
    inputs = {"middle": Input(line.middle, line.middle_u), "slope": Input(line.drift, line.drift_u)}
    for at, value, u in ((20.0, -0.1712, 0.0029), (30.0, -0.1494, 0.0041)):

        def correction(middle: float, slope: float, at: float = at) -> float:
            return middle + slope * (at - float(t.mean()))

        budget = budget_of("correction", "K", correction, inputs)
        assert (budget.value, budget.u) == pytest.approx((value, u), abs=5.5e-5)


def test_analysis_of_variance_of_a_voltage_standard() -> None:
    # JCGM 100, H.5: ten days of five readings, daily means less 10.000 V and deviations in µV (from memory; they give
    # the printed results): s(V_j) = 57 µV, s = 85 µV, F = 2.25, u = 18 µV, between the days 43 µV
    means = np.array([172.0, 116, 13, 144, 106, 31, 60, 125, 163, 41])
    deviations = np.array([60.0, 77, 111, 101, 67, 93, 80, 73, 88, 86])
    shape = np.array([-2.0, -1, 0, 1, 2]) / sqrt(2.5)
    found = from_visits(means[:, None] + deviations[:, None] * shape)
    assert found.overall.mean == pytest.approx(97, abs=0.5)
    assert found.overall.deviation == pytest.approx(57, abs=0.5)
    assert found.overall.standard_uncertainty == pytest.approx(18, abs=0.5)
    assert found.within == pytest.approx(85, abs=0.5)
    assert found.ratio == pytest.approx(2.25, abs=0.02)
    assert (found.overall.degrees_of_freedom, found.within_freedom) == (9, 40)
    # F(0.95) = 2.12 < 2.25 < F(0.975) = 2.45: a difference at the level of 5 %, none at 2.5 %
    assert 0.025 < found.chance < 0.05
    assert found.between == pytest.approx(43, abs=0.5)


@pytest.mark.parametrize(
    ("u", "digits", "wanted"), [(0.00035, 2, 5e-6), (32.0, 2, 0.5), (2.0, 1, 0.5), (0.0996, 2, 5e-3)]
)
def test_numerical_tolerance(u: float, digits: int, wanted: float) -> None:
    # JCGM 101, 7.9.2, examples (from memory): 0.00035 with two digits gives 0.000 005; 32 with two digits 0.5
    assert tolerance(u, digits) == pytest.approx(wanted)


def test_where_one_rectangular_input_dominates_the_gum_is_not_validated() -> None:
    # JCGM 101, 9.2.4 (from memory): u = 10.1, shortest interval -17.0 to 17.0, the GUM's -19.9 to 19.9
    for wide, agrees in ((1.0, True), (10.0, False)):
        inputs = {k: Input(0.0, wide if k == "d" else 1.0, "normal" if agrees else "rectangular") for k in "abcd"}
        budget = budget_of("y", "", lambda a, b, c, d: a + b + c + d, inputs)
        run = drawn(lambda a, b, c, d: np.asarray(a + b + c + d), inputs, 2_000_000, 3)
        assert validated(budget, run) is agrees
    assert budget.expanded() == pytest.approx(19.9, abs=0.05)
    assert (run.low, run.high) == pytest.approx((-17.0, 17.0), abs=0.15)
