"""Bias of averaging, shapes of planes, foci: what must hold, how it scatters, and what is refused."""

from __future__ import annotations

from collections.abc import Callable

import numpy as np
import pytest
from hypothesis import given
from hypothesis import strategies as st
from numpy.typing import NDArray

from checks.averaging import averaged, radius_by_criterion, widened
from checks.averaging_bias import Bias, bias_of, compare, corrected_peak, corrected_width, statement
from checks.beam import width_of
from checks.beam_axis import axis_of, focus_of
from checks.beam_plane import measured_shape, on_grid, plane_integral, shape_of
from checks.errors import MeasurementError

Vector = NDArray[np.float64]
STEEP = 4 * 0.3 * np.log(10)  # exp(-STEEP (r/w6)²) has the -6 dB width w6
X = np.linspace(-2e-3, 2e-3, 41)


def gaussian(r: Vector) -> Vector:
    return np.asarray(np.exp(-STEEP * (r / 1e-3) ** 2))


def read(a: float, noise: float = 0.0, seed: int = 0) -> Vector:
    return averaged(gaussian, a, np.abs(X)) + noise * np.random.default_rng(seed).standard_normal(X.size)


def bias(a: float, noise: float = 1e-4, seed: int = 0, radius_u: float = 0.0) -> Bias:
    y, sigma = read(a, noise, seed), np.full(X.size, noise)
    return bias_of(X, y, sigma, width_of(X, y, sigma), a, radius_u)


@given(st.floats(1e-6, 1e-3), st.floats(1e-4, 1e-2))
def test_averaging_never_narrows(radius: float, width: float) -> None:
    assert widened(radius, width) >= width * (1 - 1e-6)


@given(st.floats(0.01, 0.5), st.floats(0.1, 10))
def test_the_bias_does_not_depend_on_the_unit_of_length(q: float, scale: float) -> None:
    assert widened(q / 2 * 1e-3 * scale, 1e-3 * scale) == pytest.approx(widened(q / 2 * 1e-3, 1e-3) * scale, rel=1e-6)


@pytest.mark.parametrize("a", [0.1e-3, 0.2e-3, 0.3e-3])
def test_the_bias_scatters_as_it_says(a: float) -> None:
    true_share = float(averaged(gaussian, a, np.zeros(1))[0])
    true_wider = widened(a, 1e-3) / 1e-3
    found = [bias(a, 3e-3, seed) for seed in range(30)]
    pulls = [((b.share - true_share) / b.share_u, (b.widening - true_wider) / b.widening_u) for b in found]
    assert (np.abs(pulls) < 2).mean() > 0.9
    assert np.sqrt(np.mean(np.square(pulls))) > 0.3  # and is no wild guess


def test_a_radius_that_is_known_badly_makes_the_bias_so() -> None:
    well, badly = bias(0.2e-3), bias(0.2e-3, radius_u=0.02e-3)
    # the loss goes as a²: 10 % of a are 20 % of the loss
    assert badly.share_u == pytest.approx(np.hypot(well.share_u, 0.2 * (1 - well.share)), rel=1e-6)


def test_a_correction_gives_the_true_peak_and_width_back_and_says_what_it_is() -> None:
    a = 0.2e-3
    b = bias(a)
    peak = corrected_peak(float(read(a).max()), 1e-3, b)
    assert abs(peak.value - 1.0) < 2 * peak.standard_uncertainty
    assert peak.standard_uncertainty > 1e-3
    width = corrected_width(1e-6, b)
    assert abs(width.value - 1e-3) < 2 * width.standard_uncertainty
    for c in (peak, width):
        assert c.label.startswith("corrected for averaging")
        assert "assumes" in c.label


@pytest.mark.parametrize("a", [0.35e-3, 0.6e-3, 0.9e-3])
def test_no_correction_where_the_element_is_as_large_as_the_beam(a: float) -> None:
    b = bias(a)
    with pytest.raises(MeasurementError, match="no correction for averaging"):
        corrected_peak(1.0, 0.01, b)
    with pytest.raises(MeasurementError, match="smaller one"):
        corrected_width(1e-6, b)


def test_an_element_that_hides_the_beam_says_at_least() -> None:
    b = bias(0.9e-3)
    assert not b.resolved
    assert b.share >= float(averaged(gaussian, 0.9e-3, np.zeros(1))[0])
    assert "at least" in statement(b, 12, 27e6, 5e-5)


def test_the_statement_is_plain() -> None:
    b = Bias(0.2e-3, 0.7e-3, 10 ** (-2.1 / 20), 0.01, 1.18, 0.02)
    told = statement(b, 12, 27e6, 0.05e-3)
    assert told == (
        "an element of 0.4 mm diameter reads the 12th harmonic (27 MHz) 2.1 dB low and its width 18 % wide; "
        "use 0.1 mm diameter or less"
    )
    assert "small enough" in statement(b, 1, 2.25e6, 0.3e-3)
    assert "the fundamental" in statement(b, 1, 2.25e6, 0.3e-3)
    for n, word in ((2, "2nd"), (3, "3rd"), (11, "11th"), (12, "12th"), (13, "13th"), (21, "21st"), (22, "22nd")):
        assert f"the {word} harmonic" in statement(b, n, 1e6, 1e-4)


def test_two_sensors_on_one_beam_agree_once_averaging_is_allowed_for() -> None:
    large, small = 0.25e-3, 0.05e-3
    peaks = [float(read(a).max()) for a in (large, small)]
    found = compare((peaks[0], 1e-3, bias(large)), (peaks[1], 1e-3, bias(small)))
    assert found.measured_db < -0.5
    assert found.explained_db == pytest.approx(found.measured_db, abs=0.05)
    assert abs(found.e_n) < 1
    broken = compare((0.9 * peaks[0], 1e-3, bias(large)), (peaks[1], 1e-3, bias(small)))
    assert broken.left_db == pytest.approx(20 * np.log10(0.9), abs=0.05)
    assert broken.e_n < -1


def plane(
    a: float = 1.4e-3, b: float = 0.9e-3, turn: float = 0.4, step: float = 0.2e-3
) -> tuple[Vector, Vector, Vector]:
    x = np.arange(-3e-3, 3.01e-3, step)
    gx, gy = np.meshgrid(x, x)
    u, v = gx * np.cos(turn) + gy * np.sin(turn), -gx * np.sin(turn) + gy * np.cos(turn)
    return x, x, np.exp(-((u / a) ** 2) - (v / b) ** 2)


def test_shapes_scatter_as_they_say() -> None:
    x, y, clean = plane()
    sigma = np.full(clean.shape, 5e-3)
    r6 = 0.3 * np.log(10)
    pulls = []
    for seed in range(12):
        noisy = clean + sigma * np.random.default_rng(seed).standard_normal(clean.shape)
        m = measured_shape(x, y, noisy, sigma, np.random.default_rng(1000 + seed))
        pulls.append(
            [
                (m.shape.area_m2 - np.pi * 1.4e-3 * 0.9e-3 * r6) / m.area_u_m2,
                m.shape.centroid_m[0] / m.centroid_u_m[0],
                (m.shape.orientation - 0.4) / m.orientation_u,
                (m.shape.ellipticity - 0.9 / 1.4) / m.ellipticity_u,
            ]
        )
    rms = np.sqrt(np.mean(np.square(pulls), axis=0))
    assert (rms > 0.4).all()
    assert (rms < 1.8).all()


@given(st.floats(-1.5, 1.5), st.floats(0.5, 2.0))
def test_turning_and_scaling_the_beam_turns_and_scales_its_shape(turn: float, level: float) -> None:
    x, y, amplitude = plane(turn=turn)
    found, plain = shape_of(x, y, level * amplitude), shape_of(*plane(turn=0.0))
    assert found.area_m2 == pytest.approx(plain.area_m2, rel=2e-3)
    assert found.ellipticity == pytest.approx(plain.ellipticity, rel=3e-3)
    assert abs((found.orientation - turn + np.pi / 2) % np.pi - np.pi / 2) < 5e-3


def test_scattered_points_give_the_same_shape() -> None:
    random = np.random.default_rng(5)
    x, y = random.uniform(-3e-3, 3e-3, (2, 1500))
    u, v = x * np.cos(0.4) + y * np.sin(0.4), -x * np.sin(0.4) + y * np.cos(0.4)
    found = shape_of(*on_grid(x, y, np.exp(-((u / 1.4e-3) ** 2) - (v / 0.9e-3) ** 2), 0.15e-3))
    assert found.area_m2 == pytest.approx(np.pi * 1.4e-3 * 0.9e-3 * 0.3 * np.log(10), rel=0.01)
    assert found.ellipticity == pytest.approx(0.9 / 1.4, rel=0.01)


def test_the_focus_scatters_as_it_says() -> None:
    z = np.linspace(0.02, 0.1, 41)
    clean = np.exp(-(((z - 0.055) / 0.02) ** 2))
    sigma = np.full(41, 3e-3)
    pulls = []
    for seed in range(60):
        found = focus_of(z, clean + sigma * np.random.default_rng(seed).standard_normal(41), sigma)
        pulls.append((found.distance_m - 0.055) / found.distance_u_m)
    assert 0.4 < np.sqrt(np.mean(np.square(pulls))) < 1.6


ONES = np.ones(10)


@pytest.mark.parametrize(
    ("call", "told"),
    [
        (lambda: shape_of(X, X, np.ones((41, 41))), "runs out of the raster"),
        (lambda: shape_of(X[:3], X, np.ones((41, 3))), "5 points or more"),
        (lambda: shape_of(X, X, np.full((41, 41), np.nan)), "without a value"),
        (lambda: plane_integral(X, X, np.ones((3, 3)), np.ones((3, 3))), "each point of its grid"),
        (lambda: on_grid(ONES, ONES, ONES, 1e-4), "25 or more"),
        (lambda: on_grid(np.arange(30.0), np.arange(30.0), np.ones(30), 1.0), "one line"),
        (lambda: axis_of(ONES, ONES, ONES, ONES, ONES), "different distances"),
        (lambda: axis_of(np.arange(10.0), ONES, ONES, 0 * ONES, ONES), "above 0 for each peak"),
        (lambda: focus_of(X, np.ones(41) + X, np.ones(41)), "on both sides"),
        (lambda: widened(1e-3, 0.0), "width above 0"),
        (lambda: radius_by_criterion(1e-3, 0.0, 1e-2), "above 0"),
        (lambda: bias_of(X, read(1e-4), ONES, width_of(X, read(1e-4), np.zeros(41)), 0.0), "above 0"),
        (lambda: compare((1.0, 0.1, bias(0.9e-3)), (1.0, 0.1, bias(1e-4))), "hides the beam"),
        (lambda: compare((-1.0, 0.1, bias(1e-4)), (1.0, 0.1, bias(1e-4))), "peak above 0"),
    ],
)
def test_what_cannot_be_said_is_refused_in_words(call: Callable[[], object], told: str) -> None:
    with pytest.raises(MeasurementError, match=told):
        call()
