"""Type A evaluation: what must hold for made-up observations, and what is refused."""

from __future__ import annotations

from collections.abc import Callable

import numpy as np
import pytest
from scipy.stats import t

from checks.errors import MeasurementError
from checks.repeatability import from_repeats, from_revisits, from_visits


def test_coverage_of_repeats() -> None:
    inside = []
    for seed in range(400):
        i = from_repeats(np.random.default_rng(seed).normal(10.0, 1.0, 4)).as_input()
        inside.append(abs(i.value - 10.0) < t.ppf(0.975, i.freedom) * i.u)
    assert 0.91 < np.mean(inside) < 0.985


def test_a_drift_is_no_scatter() -> None:
    places = np.arange(12.0)
    noise = np.random.default_rng(3).normal(0, 1e-3, 12)
    still, drifting = from_revisits(1 + noise, places), from_revisits(1 + noise + 0.05 * places, places)
    assert drifting.deviation == pytest.approx(still.deviation)
    assert drifting.drift - still.drift == pytest.approx(0.05)
    assert drifting.deviation < from_repeats(1 + noise + 0.05 * places).deviation / 10


def test_coming_back_adds_what_it_adds() -> None:
    random = np.random.default_rng(4)
    away = random.normal(0, 0.5, (400, 1))
    found = from_visits(away + random.normal(0, 1.0, (400, 6)))
    assert found.between == pytest.approx(0.5, rel=0.15)
    assert found.within == pytest.approx(1.0, rel=0.05)
    assert found.chance < 1e-6
    assert from_visits(random.normal(0, 1.0, (400, 6))).chance > 1e-4


@pytest.mark.parametrize(
    ("call", "told"),
    [
        (lambda: from_repeats(np.array([1.0])), "2 or more"),
        (lambda: from_repeats(np.array([1.0, np.nan])), "finite"),
        (lambda: from_revisits(np.ones(4), np.ones(4)), "not all the same"),
        (lambda: from_visits(np.ones((1, 4))), "two or more"),
    ],
)
def test_too_little_is_refused_in_words(call: Callable[[], object], told: str) -> None:
    with pytest.raises(MeasurementError, match=told):
        call()
