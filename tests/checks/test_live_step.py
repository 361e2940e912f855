"""Steps of the arrival: the recursion, the search for a beginning, false alarms, and what a step does to an offset."""

import numpy as np
import pytest
from hypothesis import given, settings
from hypothesis import strategies as st
from scipy import stats

import checks.live_step
from checks.changepoint import ChangePoints, Tail
from checks.live_pivot import PivotCheck
from checks.pivot import PivotFit
from checks.recursion import Recursion
from tests.checks.synthetic import DISTANCE_M, SPEED, Truth, rotation, run, standing

# NIST/SEMATECH e-Handbook of Statistical Methods, 6.3.2.3, worked example of a cusum; from memory. There the sum
# climbs from group 13 on and signals at group 14.
BEFORE = (324.925, 324.675, 324.725, 324.350, 325.350, 325.225, 324.125, 324.525, 325.225, 324.600, 324.625, 325.150)
SHIFTED = (328.325, 327.250, 327.825, 328.500, 326.675, 327.775, 326.875, 328.350)


def started(rows: np.ndarray, values: np.ndarray, weights: np.ndarray) -> Recursion:
    """A fit of the first values, by numpy's least squares."""
    root = np.sqrt(weights)
    solution, *_ = np.linalg.lstsq(rows * root[:, None], values * root, rcond=None)
    square = float((weights * (values - rows @ solution) ** 2).sum())
    return Recursion(solution, np.linalg.inv(rows.T @ (rows * weights[:, None])), square, len(values) - rows.shape[1])


def test_the_handbooks_shift_is_found_where_it_begins() -> None:
    values = np.array([*BEFORE, *SHIFTED])
    row, candidates = np.ones(1), ChangePoints(1)
    known = started(np.ones((3, 1)), values[:3], np.ones(3))
    signals = []
    for i, value in enumerate(values):
        candidates.add(row, value, 1.0, i + 1)
        if i < 3:
            continue
        known.add(row, value, 1.0)
        found = candidates.likeliest(known)
        if found is not None and 2 * stats.t.sf(found[0], known.freedom - 1) < 1e-4:
            signals.append((i + 1, found[1].first))
    assert signals[0][0] in (14, 15)
    assert {first for at, first in signals if at >= 15} == {13}


@settings(max_examples=40, deadline=None)
@given(st.integers(0, 2**32 - 1), st.integers(3, 60))
def test_one_at_a_time_is_the_same_as_all_at_once(seed: int, more: int) -> None:
    rng = np.random.default_rng(seed)
    n = 6 + more
    rows = np.column_stack([np.ones(n), rng.normal(size=n), rng.normal(size=n)])
    values, weights = rng.normal(size=n), rng.uniform(0.2, 5, n)
    known, whole = started(rows[:6], values[:6], weights[:6]), started(rows, values, weights)
    for row, value, weight in zip(rows[6:], values[6:], weights[6:], strict=True):
        known.add(row, value, 1 / weight)
    assert known.coefficients == pytest.approx(whole.coefficients, abs=1e-8)
    assert known.inverse == pytest.approx(whole.inverse, abs=1e-8)
    assert known.square == pytest.approx(whole.square, rel=1e-8)
    assert known.freedom == whole.freedom


@settings(max_examples=40, deadline=None)
@given(st.integers(0, 2**32 - 1))
def test_the_likeliest_step_is_a_column_more_of_least_squares(seed: int) -> None:
    rng = np.random.default_rng(seed)
    n = 14  # so few that every beginning is a candidate
    rows, weights = np.column_stack([np.ones(n), np.sin(np.arange(n))]), rng.uniform(0.5, 2, n)
    values = rng.normal(size=n) + 2 * (np.arange(n) >= 8)
    candidates = ChangePoints(2)
    for i in range(n):
        candidates.add(rows[i], values[i], weights[i], i)
    found = candidates.likeliest(started(rows, values, weights))
    assert found is not None
    ts = {}
    for first in range(n - 8, n - 2):  # at a distance of 8 or less
        wider = started(np.column_stack([rows, np.arange(n) >= first]), values, weights)
        ts[first] = abs(wider.coefficients[2]) / np.sqrt(wider.inverse[2, 2] * wider.square / wider.freedom)
    t, tail = found
    if tail.first in ts:
        assert t == pytest.approx(ts[tail.first], rel=1e-8)
    assert t >= max(ts.values()) * (1 - 1e-8)


def test_memory_of_beginnings_does_not_grow_and_old_ones_are_still_near() -> None:
    candidates, row = ChangePoints(1), np.ones(1)
    known = Recursion(np.zeros(1), np.array([[1.0]]), 1.0, 1)
    rng = np.random.default_rng(2)
    for i in range(20_000):
        value = float(rng.normal() + (1.0 if i >= 11_000 else 0.0))
        candidates.add(row, value, 1.0, i)
        known.add(row, value, 1.0)
    found = candidates.likeliest(known)
    assert found is not None
    assert abs(found[1].first - 11_000) <= (20_000 - 11_000) / 4


def test_a_step_in_the_fit_is_estimated_beside_the_offset() -> None:
    rng = np.random.default_rng(4)
    theta = np.radians(np.linspace(-40, 40, 81))[rng.permutation(81)]
    fit, candidates = PivotFit(SPEED, 1e6, 81), ChangePoints(4)
    found = None
    for i, angle in enumerate(theta):
        along = DISTANCE_M + 1e-4 * np.cos(angle) - 2e-4 * np.sin(angle) + (5e-5 if i >= 30 else 0)
        time = float(along / SPEED + rng.normal(0, 1e-9))
        fit.add(float(angle), time, 1e-9, i)
        candidates.add(fit.row(float(angle), i), fit.value(time), 1e18, i)
        if i == 35:
            known = fit.recursion()
            assert known is not None
            found = candidates.likeliest(known)
            assert found is not None
            assert found[1].first == 30
            fit.step(found[1])
    stepped = fit.estimate()
    assert stepped is not None
    assert stepped.step_s is not None
    assert abs(stepped.step_s - 5e-5 / SPEED) < 3 * stepped.step_u_s
    for value, truth, k in ((stepped.x_m, 2e-4, 0), (stepped.z_m, 1e-4, 1)):
        assert abs(value - truth) < 3 * np.sqrt(stepped.covariance[k, k])
    assert stepped.residual_sd_s == pytest.approx(1e-9, rel=0.3)
    # a second step, with no arrival yet, leaves the fit as it was and takes the first one off
    fit.step(Tail(np.zeros(4), 0.0, 0, 81))
    assert fit.taken_s == pytest.approx(stepped.step_s)
    after = PivotFit(SPEED, 1e6, 81, fit.normal, fit.moment, fit.square, fit.weight, fit.points, None, fit.origin_s)
    again = after.estimate()
    assert again is not None
    assert (again.x_m, again.z_m) == pytest.approx((stepped.x_m, stepped.z_m), abs=1e-9)


def test_false_alarms_are_no_more_frequent_than_claimed(monkeypatch: pytest.MonkeyPatch) -> None:
    """At 10 % per scan instead of 0.1 %, and with the smallest step of consequence set to none."""
    monkeypatch.setattr(checks.live_step, "MATTERS_M", 1e-12)
    wrong = 0
    scans = 200
    for seed in range(scans):
        rng = np.random.default_rng(seed)
        c, seen = rotation(
            Truth(jitter_s=float(10 ** rng.uniform(-10, -8))), seed, step=float(rng.choice([1.0, 2.0])), lines=1
        )
        check = PivotCheck(c, 0.1 / c.planned_points)
        wrong += any(x.finding.code == "arrival.step" for o in seen for x in check.update(o))
    assert wrong <= stats.binom.isf(1e-3, scans, 0.1)


@pytest.mark.parametrize("step_um", [40, -60, 100])
def test_a_step_hardly_above_the_scatter_is_found_and_not_taken_for_an_offset(step_um: float) -> None:
    """Scatter of 7 um by trigger jitter: 12 standard deviations of the best possible estimate and more."""
    pulls, found = [], 0
    for seed in range(12):
        c, seen = rotation(Truth(jitter_s=5e-9, step_m=step_um * 1e-6, step_from=70), seed)
        findings = standing(run(c, seen))
        assert "pivot.offset" not in findings
        if "arrival.step" in findings:
            size = findings["arrival.step"].finding.sizes[0]
            pulls.append((size.value - step_um * 1e-6) / size.standard_uncertainty)
            found += 1
    assert found >= 11
    assert np.sqrt(np.mean(np.square(pulls))) < 1.7


def test_two_steps_are_told_one_after_the_other() -> None:
    c, seen = rotation(Truth(step_m=5e-5, step_from=50), 6)
    _, further = rotation(Truth(step_m=-7e-5, step_from=0), 6)
    said = run(c, [*seen[:120], *further[120:]])
    sizes = [(x.action, round(x.finding.sizes[0].value * 1e6)) for x in said if x.finding.code == "arrival.step"]
    assert sizes[0] == ("raised", 50)
    assert sizes[-1] == ("updated", -120)
    assert "pivot.offset" not in standing(said)
