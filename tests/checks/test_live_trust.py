"""Benches in order are left in peace; the same points give the same words; memory does not grow."""

import pickle
from dataclasses import replace

import numpy as np
import pytest
from hypothesis import given, settings
from hypothesis import strategies as st
from scipy import stats

from checks.finding import Change
from checks.live import make_checks
from checks.live_drift import DriftCheck
from checks.observation import Circumstances, Observation
from checks.standing import Standing, due
from tests.checks.synthetic import Truth, raster, rotation, run, standing

RADII = (1e-4, 2e-4, 5e-4)
EDGES = ("rigid", "soft", "unbaffled")
FALSE_ALARMS = 0.01  # of clean scans, at most


def clean(seed: int) -> tuple[Circumstances, list[Observation]]:
    """A bench with nothing wrong: any element, quiet or noisy, cool or warming, long scans and short."""
    rng = np.random.default_rng(seed)
    truth = Truth(
        edge=str(rng.choice(EDGES)),
        radius_m=float(rng.choice(RADII)),
        noise_v=float(10 ** rng.uniform(-6.5, -4)),
        jitter_s=float(10 ** rng.uniform(-11, -9)),
        wander=float(10 ** rng.uniform(-4, -2.5)),
        flutter=float(10 ** rng.uniform(-4, -2.5)),
        warming_k=float(rng.uniform(-0.3, 0.3)),
        pivot_x_m=float(rng.normal(0, 3e-6)),
        pivot_z_m=float(rng.normal(0, 3e-6)),
        angle_zero=float(np.radians(rng.normal(0, 0.03))),
    )
    if seed % 8 == 0:
        return raster(truth, seed)
    step = float(rng.choice([1.0, 2.0, 4.0]))
    return rotation(truth, seed, step=step, lines=int(rng.choice([1, 3, 8, 16])))


def test_clean_benches_are_left_in_peace() -> None:
    accused = []
    for seed in range(400):
        c, seen = clean(seed)
        cautions = [x for x in run(c, seen) if x.finding.severity != "note"]
        accused += [(seed, cautions[0].finding.code)] if cautions else []
    assert len(accused) <= FALSE_ALARMS * 400, accused


def test_findings_are_calm() -> None:
    c, seen = rotation(Truth(pivot_x_m=1e-4, pivot_z_m=-2e-4, angle_zero=0.02, drift_db=0.5), 1, step=0.1)
    said = run(c, seen)
    for code in {x.finding.code for x in said}:
        assert len([x for x in said if x.finding.code == code]) <= 10


@pytest.mark.parametrize("seed", range(3))
def test_the_same_points_give_the_same_words(seed: int) -> None:
    c, seen = rotation(Truth(pivot_x_m=1e-4, angle_zero=0.02, step_m=5e-5, step_from=50, drift_db=0.3), seed)
    # the clock has no part in it, and reading the points back from bytes neither
    later = [replace(o, time_s=o.time_s * 3 + 7) for o in pickle.loads(pickle.dumps(seen))]
    assert repr(run(c, seen)) == repr(run(c, later))


def test_memory_does_not_grow_with_the_number_of_points() -> None:
    c, seen = rotation(Truth(pivot_x_m=1e-4, pivot_z_m=1e-4, angle_zero=0.02, null_line=4, null_db=30), 1)
    checks = make_checks(c)
    held = []
    for turn in range(12):
        for o in seen:
            later = replace(o, index=o.index + turn * len(seen))
            for check in checks:
                list(check.update(later))
        held.append(len(pickle.dumps(checks)))
    # 179 points and 2,148: some numbers become longer in words
    assert held[-1] <= held[0] + 200


@given(st.integers(3, 500), st.floats(1e-9, 1e-2))
def test_thresholds_hold_the_false_alarms_that_they_claim(freedom: int, rate: float) -> None:
    # Hotelling's T² with 2 and n degrees of freedom is 2 F(2, n): its tail has a closed form, used for the pivot offset
    squared = freedom * (rate ** (-2 / freedom) - 1)
    assert stats.f.sf(squared / 2, 2, freedom) == pytest.approx(rate, rel=1e-6)
    # and bounds Student's t from above, as used for drift, angle zero and steps
    assert 2 * stats.t.sf(np.sqrt(squared), freedom) <= rate * (1 + 1e-9)


def test_drift_is_student_t_when_nothing_drifts() -> None:
    """At a false-alarm rate of 5 % per asking, white levels are accused no more often than that."""
    c, seen = rotation(Truth(wander=0.05, noise_v=1e-7), 0, step=4.0)
    references = [o for o in seen if o.reference]
    rng = np.random.default_rng(11)
    accused = 0
    for _ in range(1500):
        check = DriftCheck(c, 0.05)
        said: list[Change] = []
        for o in references:
            level = 0.05 * np.exp(0.05 * rng.standard_normal())
            said = list(check.update(replace(o, components=np.full(16, level, complex))))
        accused += any(x.action == "raised" for x in said)
    assert accused / 1500 <= 0.05 + 3 * np.sqrt(0.05 * 0.95 / 1500)


@settings(max_examples=30, deadline=None)
@given(st.integers(0, 2**32 - 1))
def test_every_finding_is_raised_before_it_is_updated_or_cleared(seed: int) -> None:
    rng = np.random.default_rng(seed)
    truth = Truth(
        pivot_x_m=rng.normal(0, 1e-4),
        pivot_z_m=rng.normal(0, 1e-4),
        angle_zero=rng.normal(0, 0.01),
        drift_db=rng.normal(0, 0.3),
        noise_v=10 ** rng.uniform(-6, -3),
        step_m=rng.normal(0, 1e-4),
        step_from=int(rng.integers(0, 60)),
        null_line=int(rng.integers(0, 16)),
        null_db=rng.uniform(0, 40),
    )
    c, seen = rotation(truth, seed, step=2.0)
    said = run(c, seen)
    told: set[str] = set()
    for change in said:
        code = change.finding.code
        assert (code in told) == (change.action != "raised")
        (told.discard if change.action == "cleared" else told.add)(code)
        assert "\n" not in change.finding.summary + change.finding.consequence + change.finding.remedy
        assert "nan" not in change.finding.summary + change.finding.consequence
        assert len(change.finding.summary) < 200
    assert told == set(standing(said))


def test_a_finding_that_hardly_moves_is_told_once_and_once_more_at_the_end() -> None:
    c, seen = rotation(Truth(drift_db=0.4), 0)
    drift = [x.finding for x in run(c, seen) if x.finding.code == "drift.reference"]
    size = drift[0].sizes[0]
    still = Standing()
    moved = replace(drift[0], sizes=(replace(size, value=size.value + 0.9 * size.standard_uncertainty),))
    assert [x.action for x in still.now(drift[0], 1)] == ["raised"]
    assert still.now(moved, 2) == []
    assert [x.action for x in still.last_word()] == ["updated"]
    assert still.last_word() == []
    assert [x.action for x in still.now(None, 3)] == ["cleared"]


def test_costly_estimates_are_made_at_each_early_point_and_later_at_every_eighth() -> None:
    assert all(due(n) for n in range(1, 33))
    assert [n for n in range(33, 60) if due(n)] == [40, 48, 56]
