"""What stands at the end does not hang on the order in which the angles were visited, nor on the batches."""

from collections.abc import Callable
from dataclasses import replace

import numpy as np
import pytest

from checks.observation import Circumstances, Observation
from tests.checks.synthetic import Truth, beam_radius, rotation, run, standing

FAULTY = Truth(pivot_x_m=0.3e-3, pivot_z_m=-0.2e-3, angle_zero=np.radians(0.7), null_line=6, null_db=30, jitter_s=3e-10)


def reordered(seen: list[Observation], key: Callable[[Observation], float], every: int = 10) -> list[Observation]:
    """The same points in another order, the references still between them at equal distances."""
    references = [o for o in seen if o.reference]
    others = sorted((o for o in seen if not o.reference), key=key)
    order: list[Observation] = []
    for i, o in enumerate(others):
        if i % every == 0 and len(references) > 1:
            order.append(references.pop())
        order.append(o)
    return [replace(o, index=i) for i, o in enumerate([*order, *references])]


def shuffled(seed: int) -> Callable[[Observation], float]:
    rng = np.random.default_rng(seed)
    return lambda _: float(rng.random())


ORDERS: list[tuple[str, Callable[[Observation], float]]] = [
    ("downwards", lambda o: -o.commanded.theta),
    ("from the middle outwards", lambda o: abs(o.commanded.theta)),
    ("at random", shuffled(3)),
    ("at random again", shuffled(4)),
]


def at_the_end(c: Circumstances, seen: list[Observation]) -> dict[str, list[tuple[str, float, float]]]:
    return {
        code: [(s.name, s.value, s.standard_uncertainty) for s in change.finding.sizes]
        for code, change in standing(run(c, seen)).items()
        if change.finding.severity != "note"
    }


@pytest.mark.parametrize("order", [o for _, o in ORDERS], ids=[name for name, _ in ORDERS])
def test_the_same_findings_and_sizes_in_another_order(order: Callable[[Observation], float]) -> None:
    c, seen = rotation(FAULTY, 7)
    first, second = at_the_end(c, seen), at_the_end(c, reordered(seen, order))
    assert set(first) == set(second) == {"pivot.offset", "angle.zero", "null.source"}
    for code, sizes in first.items():
        for (name, a, ua), (_, b, ub) in zip(sizes, second[code], strict=True):
            assert abs(a - b) <= 2 * np.hypot(ua, ub), f"{code} {name}: {a} and {b}"


@pytest.mark.parametrize(("x_mm", "z_mm"), [(0.8, 0.8), (-0.8, 0.8), (0.6, -1.0)])
@pytest.mark.parametrize("radius_m", [0.08e-3, 0.3e-3])
def test_uneven_sides_of_a_pivot_offset_are_told_with_it_and_not_as_angle_zero(
    x_mm: float, z_mm: float, radius_m: float
) -> None:
    c, seen = rotation(Truth(pivot_x_m=x_mm * 1e-3, pivot_z_m=z_mm * 1e-3, radius_m=radius_m), 1, lines=8)
    findings = standing(run(c, seen))
    assert "angle.zero" not in findings
    # the swing to either side at 40°, and what a Gaussian beam makes of it
    t = np.radians([40.0, -40.0])
    aside = x_mm * 1e-3 * (np.cos(t) - 1) + z_mm * 1e-3 * np.sin(t)
    right, left = 20 / np.log(10) * (aside / beam_radius(np.array([8.0]))) ** 2
    words = findings["pivot.offset"].finding.consequence
    said = float(words.split("differ by up to ")[1].split(" dB")[0])
    assert said == pytest.approx(abs(right - left), rel=0.1)


def test_an_even_swing_says_nothing_of_sides() -> None:
    c, seen = rotation(Truth(pivot_z_m=0.5e-3), 1)
    assert "left and right" not in standing(run(c, seen))["pivot.offset"].finding.consequence


@pytest.mark.parametrize("applied_mm", [(0.0, 0.0), (0.4, -0.25)])
def test_the_remedy_gives_the_total_of_what_was_applied_and_what_is_left(applied_mm: tuple[float, float]) -> None:
    c, seen = rotation(Truth(pivot_x_m=0.2e-3, pivot_z_m=0.1e-3), 2)
    c = replace(c, pivot_x_m=applied_mm[0] * 1e-3, pivot_z_m=applied_mm[1] * 1e-3)
    finding = standing(run(c, seen))["pivot.offset"].finding
    x, z = (float(finding.remedy.split(f"{axis}_mm = ")[1].split(",")[0]) for axis in "xz")
    assert (x, z) == pytest.approx((applied_mm[0] + 0.2, applied_mm[1] + 0.1), abs=0.01)
    assert ("left after the correction" in finding.summary) == any(applied_mm)
