"""What is stated of the radius where the data do not say which edge behaviour the element has."""

import numpy as np
import pytest

from checks.directivity import plane_responses
from checks.element import EDGES, Edge
from checks.radius import RadiusFit, fit_edges, fit_law, in_doubt, told_apart
from tests.checks.synthetic import SPEED, Truth, rotation

TRUE = 0.2e-3
SEEDS = 12


def fits_of(edge: Edge, seed: int, span: float, lines: int, wander: float) -> list[RadiusFit]:
    c, seen = rotation(Truth(edge=edge, wander=wander, noise_v=1e-4, flutter=0.0), seed, span, 2.0, lines)
    return fit_edges(plane_responses(seen, c)[0], SPEED, TRUE)


@pytest.mark.parametrize("edge", EDGES)
@pytest.mark.parametrize(("span", "lines", "wander"), [(30.0, 3, 5e-3), (80.0, 2, 2e-2)])
def test_the_truth_lies_within_the_uncertainty_though_the_edge_is_guessed(
    edge: Edge, span: float, lines: int, wander: float
) -> None:
    pulls, doubtful = [], 0
    for seed in range(SEEDS):
        fits = fits_of(edge, seed, span, lines, wander)
        doubtful += not told_apart(fits)
        best = in_doubt(fits)[0]
        pulls += list((best.radius_m - TRUE) / best.radius_u_m)
    assert doubtful > SEEDS / 2
    assert np.mean(np.abs(pulls) < 2) >= 0.85


def test_where_the_edge_is_known_nothing_is_added() -> None:
    fits = fits_of("soft", 1, 80.0, 8, 1e-3)
    assert told_apart(fits)
    best = in_doubt(fits)[0]
    assert best.radius_u_m == pytest.approx(fits[0].radius_u_m, rel=0.02)
    assert best.angle_zero == fits[0].angle_zero


def test_what_frequencies_have_in_common_does_not_average_out_of_the_law() -> None:
    fit = fits_of("soft", 1, 80.0, 8, 1e-3)[0]
    own, shared = fit_law(fit), fit_law(fit, speed_u=0.01)
    assert own is not None
    assert shared is not None
    assert shared.radius_m == own.radius_m
    # a = k a c / (2 pi f): one per cent of the speed of sound is one per cent of the radius
    added = np.sqrt(shared.radius_u_m**2 - own.radius_u_m**2)
    assert added == pytest.approx(0.01 * own.radius_m, rel=1e-6)
    radius, u = shared.at(fit.frequencies_hz)
    assert np.all(u >= 0.0099 * radius)
