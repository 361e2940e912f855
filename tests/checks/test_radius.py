"""Directional response and radius from made-up scans whose truth is known."""

from dataclasses import replace
from functools import cache

import numpy as np
import pytest

from checks.directivity import HalfAngle, PlaneResponse, half_angle, plane_responses
from checks.element import EDGES, Edge, angle_at_level
from checks.errors import MeasurementError
from checks.observation import Circumstances
from checks.radius import RadiusFit, fit_edges, fit_law, radii_from_angles, told_apart
from tests.checks.synthetic import SPEED, Truth, Vector, comb, pattern, rotation

SEEDS = 40


def response_of(truth: Truth, seed: int, span: float = 80.0, step: float = 2.0, lines: int = 8) -> PlaneResponse:
    c, seen = rotation(truth, seed, span, step, lines)
    return plane_responses(seen, c)[0]


@cache
def fits_of(edge: Edge, seeds: int = SEEDS) -> list[list[RadiusFit]]:
    truth = Truth(edge=edge, angle_zero=np.radians(0.7), wander=2e-3, flutter=0.0)
    return [fit_edges(response_of(truth, seed), SPEED, 0.2e-3) for seed in range(seeds)]


@pytest.mark.parametrize("edge", EDGES)
def test_the_edge_behaviour_is_found_from_the_data(edge: Edge) -> None:
    for fits in fits_of(edge, 6):
        assert fits[0].edge == edge
        assert told_apart(fits)


def test_radius_and_angle_zero_lie_within_their_uncertainty_as_often_as_they_say() -> None:
    pulls, zeros = [], []
    for fits in fits_of("soft"):
        fit = next(f for f in fits if f.edge == "soft")
        pulls += list((fit.radius_m - 0.2e-3) / fit.radius_u_m)
        zeros.append((fit.angle_zero - np.radians(0.7)) / fit.angle_zero_u)
    # lines of a scan share the wander of its points, so there are some 40 independent draws, not 320: the rms of
    # 40 standard normal draws lies between 0.65 and 1.35 but for one case in a thousand (chi-squared, 40)
    for pull in (np.array(pulls), np.array(zeros)):
        assert 0.5 < np.sqrt(np.mean(pull**2)) < 1.4
        assert np.mean(np.abs(pull) < 2) > 0.9


def test_stated_uncertainty_is_close_to_the_cramer_rao_bound() -> None:
    """White noise only: the inverse Fisher information, from the pattern by differences, is the least possible."""
    noise, radius, lines = 2e-4, 0.2e-3, 6
    truth = Truth(noise_v=noise, wander=0.0, flutter=0.0, jitter_s=0.0)
    planes = [response_of(truth, seed, lines=lines) for seed in range(12)]
    fits = [next(f for f in fit_edges(p, SPEED, radius) if f.edge == "rigid") for p in planes]
    theta, frequencies = planes[0].theta, planes[0].frequencies_hz
    level = 0.05 * comb(np.arange(1.0, lines + 1))

    def model(zero: float, radii: Vector) -> Vector:
        columns = [pattern(theta - zero, frequencies[k : k + 1], radii[k], "rigid") for k in range(lines)]
        return np.hstack(columns) * level

    plain, each = np.full(lines, radius), np.eye(lines)
    slopes = [(model(1e-6, plain) - model(-1e-6, plain)) / 2e-6]
    slopes += [(model(0, plain + 1e-8 * e) - model(0, plain - 1e-8 * e)) / 2e-8 for e in each]
    slopes += [model(0, plain) * e for e in each]
    jacobian = np.array([d.ravel() for d in slopes]) / noise
    bound = np.sqrt(np.diag(np.linalg.inv(jacobian @ jacobian.T)))
    stated = np.mean([[f.angle_zero_u, *f.radius_u_m] for f in fits], axis=0)
    assert np.all(stated / bound[: lines + 1] < 1.5)
    assert np.all(stated / bound[: lines + 1] > 0.9)
    pulls = np.array([(f.radius_m - radius) / f.radius_u_m for f in fits])
    assert np.sqrt(np.mean(pulls**2)) == pytest.approx(1.0, abs=0.3)


def test_a_pattern_that_is_hardly_seen_does_not_tell_the_edges_apart() -> None:
    # ±8° only, noisy: the cosine factors differ by less than 1 %
    fits = [fit_edges(response_of(Truth(wander=1e-2), s, span=16, step=1.0, lines=4), SPEED, 0.2e-3) for s in range(6)]
    assert sum(told_apart(f) for f in fits) <= 1


def test_the_wrong_edge_behaviour_shows_as_a_radius_that_falls_like_a_law() -> None:
    # to leading order a² = a0² + (c/(pi f))² when a soft edge is taken for a rigid one (derived)
    fits = fits_of("soft", 6)
    for found in fits:
        right, wrong = (fit_law(next(f for f in found if f.edge == e)) for e in ("soft", "rigid"))
        assert right is not None
        assert wrong is not None
        assert wrong.term_m2_hz2 > 2 * np.sqrt(wrong.covariance[1, 1])
        assert 0.3 < wrong.term_m2_hz2 / (SPEED / np.pi) ** 2 < 1.2
        assert abs(right.term_m2_hz2) < 4 * np.sqrt(right.covariance[1, 1])
        radius, _ = right.at(np.array([5e6]))
        assert radius[0] == pytest.approx(0.2e-3, rel=0.02)


@pytest.mark.parametrize("seed", range(8))
def test_half_angles_free_of_the_zero_and_radii_as_the_standard_takes_them(seed: int) -> None:
    zero = np.radians(1.0)
    plane = response_of(Truth(angle_zero=zero, wander=1e-3), seed, step=1.0)
    for line in (2, 5):
        ka = 2 * np.pi * plane.frequencies_hz[line] / SPEED * 0.2e-3
        for level in (-3.0, -6.0):
            half, expected = half_angle(plane, line, level, zero=zero), angle_at_level(ka, level, "rigid")
            assert half.half_width is not None
            assert half.middle is not None
            assert expected is not None
            allowed = 4 * half.half_width_u + 2e-3 * expected  # and what the curve between points leaves
            assert abs(half.half_width - expected) < allowed
            assert abs(half.middle - zero) < allowed
    lines = [int(n) for n in np.nonzero(plane.usable)[0]]
    halves = {(n, level): half_angle(plane, n, level, zero=zero) for n in lines for level in (-3.0, -6.0)}
    by_angle = {round(r.frequency_hz / 1e6, 2): r for r in radii_from_angles(plane, halves, SPEED)}
    found = by_angle[13.5]
    assert found.mean_m == pytest.approx(0.2e-3, rel=0.01)
    assert by_angle[2.25].a6_m is None  # ka = 1.9: a rigid disc never falls by 6 dB
    assert by_angle[2.25].mean_m is None


def test_levels_that_are_not_reached_give_none() -> None:
    plane = response_of(Truth(radius_m=1e-4), 1, span=20)
    assert half_angle(plane, 0, -3.0) == HalfAngle(None, None)


def test_the_response_is_signed_past_a_null() -> None:
    plane = response_of(Truth(radius_m=0.5e-3, noise_v=1e-7), 1, step=1.0)
    ratio = plane.amplitude / plane.reference
    lobe = ratio[:, 7].min()
    assert 20 * np.log10(-lobe) == pytest.approx(-17.57, abs=0.15)  # first side lobe of a disc


def test_without_angles_or_signal_there_is_one_clear_line() -> None:
    c: Circumstances
    c, seen = rotation(Truth(), 1, step=2.0, lines=4)
    with pytest.raises(MeasurementError, match="5 angles or more"):
        plane_responses(seen[:4], c)
    silent = [replace(o, components=np.zeros(4, complex)) for o in seen]
    with pytest.raises(MeasurementError, match="is the source on"):
        plane_responses(silent, c)
    noisy = [replace(o, component_noise_v=np.full(4, 0.02)) for o in seen]
    with pytest.raises(MeasurementError):
        fit_edges(plane_responses(noisy, c)[0], SPEED, 0.2e-3)
