"""How the results of rotations lie to the truth of benches drawn at random, in units of what they state."""

from __future__ import annotations

from collections.abc import Iterable, Iterator
from concurrent.futures import ProcessPoolExecutor
from dataclasses import dataclass
from functools import partial
from math import degrees, pi
from multiprocessing import get_context

import numpy as np
from threadpoolctl import threadpool_limits

from checks.element import angle_at_level
from checks.errors import MeasurementError
from checks.water import speed_of_sound
from tests.faults.drawn import drawn
from tests.faults.in_hand import Scanned, scanned

COVERED = 2.0  # standard uncertainties: 95.45 % of a normal distribution


@dataclass(frozen=True)
class Verdict:
    """One result of one bench: error and standard uncertainty, in the result's own unit."""

    name: str
    bench: int
    error: float
    u: float

    @property
    def pull(self) -> float:
        """Error in standard uncertainties."""
        return self.error / self.u

    @property
    def covered(self) -> bool:
        """Whether the truth lies within twice the standard uncertainty."""
        return abs(self.pull) <= COVERED


@dataclass(frozen=True)
class Edges:
    """Whether the edge behaviour was named rightly, and whether the data were said to tell."""

    bench: int
    right: bool
    said: bool


def verdicts(family: int, number: int) -> list[Verdict | Edges]:
    """Scan one bench and compare; a bench on which nothing can be measured gives nothing."""
    try:
        with threadpool_limits(1, "blas"):
            return list(_compared(scanned(drawn(number, family)), number))
    except MeasurementError:
        return []


def _compared(scan: Scanned, number: int) -> Iterator[Verdict | Edges]:
    truth, result = scan.bench.truth, scan.results[0]
    yield Edges(number, result.best.edge == truth.element.edge, result.edge_is_known)
    x, _, z = truth.mechanics.pivot_offset_mm
    zero_deg = -truth.mechanics.angle_zero_deg
    radius_m = truth.element.radius_mm * 1e-3
    for name, true, conditions in (
        ("mean effective radius", radius_m, {}),
        ("pivot offset", x * 1e-3, {"axis": "x"}),
        ("pivot offset", z * 1e-3, {"axis": "z"}),
        ("angle zero", zero_deg, {}),
    ):
        found = scan.one(name, **conditions)
        if found.value is not None and found.standard_uncertainty is not None:
            told = " ".join([name, *conditions.values()])
            yield Verdict(told, number, found.value - true, found.standard_uncertainty)
    speed = speed_of_sound(truth.tank.temperature_c)
    for (line, level), half in result.halves.items():
        ka = 2 * pi * float(result.response.frequencies_hz[line]) / speed * radius_m
        true_half = angle_at_level(ka, level, truth.element.edge)
        if true_half is not None and half.half_width is not None:
            yield Verdict("half-angle", number, degrees(half.half_width - true_half), degrees(half.half_width_u))


def scored(family: int, numbers: Iterable[int]) -> list[Verdict | Edges]:
    """Verdicts on many benches, on all cores."""
    with ProcessPoolExecutor(mp_context=get_context("spawn")) as pool:
        return [one for many in pool.map(partial(verdicts, family), numbers, chunksize=4) for one in many]


def table(all_of_them: list[Verdict | Edges]) -> Iterator[str]:
    """Lines for people."""
    yield f"{'result':<24} {'number':>6} {'within 2 u':>11} {'sd error/u':>11} {'median |error|':>15} {'median u':>10}"
    found = [v for v in all_of_them if isinstance(v, Verdict)]
    for name in dict.fromkeys(v.name for v in found):
        of = [v for v in found if v.name == name]
        pulls = np.array([v.pull for v in of])
        within = sum(v.covered for v in of) / len(of)
        error, u = np.median([abs(v.error) for v in of]), np.median([v.u for v in of])
        yield f"{name:<24} {len(of):>6} {within:>11.3f} {pulls.std():>11.2f} {error:>15.3g} {u:>10.3g}"
    edges = [e for e in all_of_them if isinstance(e, Edges)]
    wrong = sum(e.said and not e.right for e in edges)
    yield f"edge behaviour: {wrong} of {len(edges)} wrong, {sum(not e.said for e in edges)} said not to be told apart"
