"""Widths, peaks and averaging from made-up profiles."""

import numpy as np
import pytest
from hypothesis import given
from hypothesis import strategies as st

from checks.averaging import averaged_share, largest_radius, true_width6
from checks.beam import peak_of, width_of
from checks.errors import MeasurementError
from tests.checks.synthetic import Truth, Vector, beam_radius, raster

W6 = 2 * np.sqrt(0.3 * np.log(10))  # full -6 dB width of exp(-(x/w)²), over w


@pytest.mark.parametrize("step_mm", [0.1, 0.2, 0.4])
def test_widths_scatter_as_they_say(step_mm: float) -> None:
    w, sigma = 1e-3, 5e-3
    x = np.arange(-2.4, 2.41, step_mm) * 1e-3
    pulls = []
    for seed in range(60):
        noisy = np.exp(-(((x - 1e-4) / w) ** 2)) + np.random.default_rng(seed).normal(0, sigma, x.size)
        found = width_of(x, noisy, np.full(x.size, sigma))
        pulls.append((found.width_m - W6 * w) / found.standard_uncertainty_m)
    # the peak is the largest of a noisy curve and so a little high, the width a little small
    assert 0.5 < np.sqrt(np.mean(np.square(pulls))) < 1.5
    assert np.mean(np.abs(pulls) < 2.5) > 0.9


@given(st.floats(-5e-4, 5e-4), st.floats(5e-4, 1.5e-3), st.permutations(range(41)))
def test_the_order_of_points_does_not_matter(centre: float, w: float, order: list[int]) -> None:
    x = np.linspace(-4e-3, 4e-3, 41)
    y = np.exp(-(((x - centre) / w) ** 2))
    sigma = np.full(41, 1e-4)
    found = width_of(x[order], y[order], sigma)
    assert found == width_of(x, y, sigma)
    assert found.width_m == pytest.approx(W6 * w, rel=0.01)
    assert (found.left_m + found.right_m) / 2 == pytest.approx(centre, abs=2e-5)


def test_a_profile_that_does_not_fall_far_enough_is_refused() -> None:
    x = np.linspace(-1e-3, 1e-3, 11)
    with pytest.raises(MeasurementError, match="a longer span"):
        width_of(x, np.exp(-((x / 5e-3) ** 2)), np.full(11, 1e-3))
    with pytest.raises(MeasurementError, match="5 points or more"):
        width_of(x[:4], np.ones(4), np.ones(4))


def test_peak_of_a_raster_in_whatever_order() -> None:
    c, seen = raster(Truth(wander=2e-3), 4)
    x, y = (np.array([getattr(o.commanded, axis) for o in seen]) for axis in "xy")
    amplitude = np.array([abs(o.components[5]) for o in seen])  # the beam is 2.4 mm wide at the sixth line
    found = peak_of(x, y, amplitude)
    assert abs(found.x_m - 0.3e-3) < 4 * found.x_u_m + 1e-6
    assert abs(found.y_m + 0.2e-3) < 4 * found.y_u_m + 1e-6
    assert max(found.x_u_m, found.y_u_m) < 1e-5
    mixed = np.random.default_rng(1).permutation(x.size)
    again = peak_of(x[mixed], y[mixed], amplitude[mixed])
    assert again.x_m == pytest.approx(found.x_m, abs=1e-12)
    along = np.abs(y) < 1e-9
    width = width_of(*_mean_by_place(x[along], amplitude[along]), np.full(17, 1e-4))
    assert width.width_m == pytest.approx(W6 * float(beam_radius(np.array([6.0]))[0]), rel=0.02)
    assert len(seen) == c.planned_points


def _mean_by_place(x: Vector, y: Vector) -> tuple[Vector, Vector]:
    places = np.unique(np.round(x, 9))
    return places, np.array([y[np.abs(x - p) < 1e-9].mean() for p in places])


@pytest.mark.parametrize("shape", ["flat", "edge"])
def test_a_map_without_a_top_is_refused(shape: str) -> None:
    x, y = (a.ravel() for a in np.meshgrid(np.linspace(-1, 1, 9) * 1e-3, np.linspace(-1, 1, 9) * 1e-3))
    level = np.ones(81) + (0.1e3 * x) ** 2 if shape == "flat" else np.exp(2e2 * x)
    with pytest.raises(MeasurementError, match=r"single top|rises up to its border"):
        peak_of(x, y, level)


@given(st.floats(1e-6, 2e-3), st.floats(1e-4, 1e-2))
def test_averaging_takes_from_the_peak_and_widens(radius: float, width6: float) -> None:
    share = averaged_share(radius, width6)
    assert 0 < share <= 1
    s = (radius * W6 / width6) ** 2
    assert share >= 1 - s / 2 - 1e-12  # 1 - s/2 + s²/6 - ... (series of (1 - exp(-s))/s)
    assert true_width6(width6, radius) <= width6 * (1 + 1e-12)


@given(st.floats(1e-3, 0.4), st.floats(1e-4, 1e-2))
def test_the_largest_radius_loses_just_what_is_allowed(loss: float, width6: float) -> None:
    assert 1 - averaged_share(largest_radius(width6, loss), width6) == pytest.approx(loss, rel=1e-6)
