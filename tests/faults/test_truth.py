"""Benches drawn at random: the truth lies where the results say."""

from __future__ import annotations

import pytest
from scipy.stats import binom

from tests.faults.truth import Edges, Verdict, verdicts

pytestmark = [pytest.mark.slow, pytest.mark.timeout(600)]
FAMILY, BENCHES = 2, 40
ONE_IN = 1e-4  # by chance, if the coverage is 92 %, which is still allowed


@pytest.fixture(scope="module")
def found() -> list[Verdict | Edges]:
    return [one for number in range(BENCHES) for one in verdicts(FAMILY, number)]


@pytest.mark.parametrize("name", ["mean effective radius", "pivot offset x", "pivot offset z", "angle zero"])
def test_the_truth_lies_within_twice_the_stated_uncertainty(found: list[Verdict | Edges], name: str) -> None:
    of = [v for v in found if isinstance(v, Verdict) and v.name == name]
    assert len(of) > 0.9 * BENCHES
    assert sum(v.covered for v in of) >= binom.ppf(ONE_IN, len(of), 0.92)
    # and it is not stated so large that this would be no wonder
    assert max(abs(v.pull) for v in of) > 1.0


def test_half_angles_lie_within_what_they_state(found: list[Verdict | Edges]) -> None:
    # those of one bench have much in common, so benches count
    benches: dict[int, list[bool]] = {}
    for v in found:
        if isinstance(v, Verdict) and v.name == "half-angle":
            benches.setdefault(v.bench, []).append(v.covered)
    mostly = [sum(inside) > len(inside) / 2 for inside in benches.values()]
    assert sum(mostly) >= binom.ppf(ONE_IN, len(mostly), 0.92)


def test_the_edge_behaviour_is_named_rightly_where_it_is_named(found: list[Verdict | Edges]) -> None:
    edges = [v for v in found if isinstance(v, Edges)]
    wrong = sum(e.said and not e.right for e in edges)
    assert wrong <= binom.ppf(1 - ONE_IN, len(edges), 0.05)
    assert sum(e.said for e in edges) > len(edges) / 2
