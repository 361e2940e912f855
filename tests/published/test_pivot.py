"""Pivot offset: exact rotation geometry, and the Cramér-Rao bound of the arrival model."""

import numpy as np
import pytest
from numpy.typing import NDArray

from checks.bent_wave import Wave, swing
from checks.pivot import PivotFit, fit_pivot

C = 1482.4


def sweep(count: int, half_deg: float) -> NDArray[np.float64]:
    return np.radians(np.linspace(-half_deg, half_deg, count))


# arrivals against angle zero in ns, plane wave: t(+40°), t(-40°), and peak to peak over ±20, ±40, ±60°; offsets in mm
# (worked out with another program from the rotation of a point)
TABLE = [
    (0.10, 0.00, -43.361, 43.361, (46.144, 86.723, 116.841)),
    (0.00, 0.10, -15.782, -15.782, (4.068, 15.782, 33.729)),
    (0.10, 0.10, -59.143, 27.579, (46.144, 86.723, 120.092)),
    (0.05, 0.50, -100.592, -57.230, (33.559, 102.274, 199.538)),
    (1.00, 0.00, -433.613, 433.613, (461.441, 867.226, 1168.410)),
]


@pytest.mark.parametrize(("x_mm", "z_mm", "up", "down", "spans"), TABLE)
def test_arrivals_of_the_table_and_back_to_the_offset(
    x_mm: float, z_mm: float, up: float, down: float, spans: tuple[float, ...]
) -> None:
    theta = sweep(81, 60)
    # a distance so large that the wave is plane
    fit = PivotFit(C, 1e6, 81)
    for order, angle in enumerate(theta):
        turn = np.array([[np.cos(angle), np.sin(angle)], [-np.sin(angle), np.cos(angle)]])
        _, along = turn @ np.array([x_mm, z_mm]) * 1e-3
        fit.add(float(angle), float(along) / C, 1e-9, order)
    found = fit.estimate(drift=False)
    assert found is not None
    assert (found.x_m * 1e3, found.z_m * 1e3) == pytest.approx((x_mm, z_mm), abs=1e-6)
    ns = found.arrival_at(np.radians([40.0, -40.0]), C) * 1e9
    assert ns == pytest.approx([up, down], abs=2e-3)
    for half, span in zip((20, 40, 60), spans, strict=True):
        assert np.ptp(found.arrival_at(sweep(6001, half), C)) * 1e9 == pytest.approx(span, abs=5e-3)


# Cramér-Rao standard deviations in um at 1 ns of white timing noise: count, half span, x, z, x with a free drift of a
# sweep one way (computed with another program, confirmed there by Monte Carlo)
BOUNDS = [
    (9, 40, 1.1645, 5.7828, 45.721),
    (41, 40, 0.5900, 3.1506, 25.904),
    (81, 40, 0.4244, 2.2927, 19.050),
    (161, 40, 0.3027, 1.6453, 13.750),
    (41, 20, 1.1355, 12.2610, 202.866),
    (81, 60, 0.3013, 1.0658, 5.845),
]


@pytest.mark.parametrize(("count", "half", "x_um", "z_um", "drifting_um"), BOUNDS)
def test_stated_uncertainty_is_the_cramer_rao_bound(
    count: int, half: float, x_um: float, z_um: float, drifting_um: float
) -> None:
    fit = PivotFit(C, 1e6, count)
    for order, angle in enumerate(sweep(count, half)):
        fit.add(float(angle), 0.0, 1e-9, order)
    plain, drifting = fit.estimate(drift=False), fit.estimate()
    assert plain is not None
    assert drifting is not None
    assert np.sqrt(np.diag(plain.covariance)) * 1e6 == pytest.approx([x_um, z_um], rel=1e-3)
    assert np.sqrt(drifting.covariance[0, 0]) * 1e6 == pytest.approx(drifting_um, rel=2e-3)
    assert np.sqrt(drifting.covariance[1, 1]) * 1e6 == pytest.approx(z_um, rel=1e-3)  # z does not care


def test_estimates_scatter_as_the_bound_says() -> None:
    theta, rng = sweep(81, 40), np.random.default_rng(20)
    found = []
    for _ in range(400):
        fit = PivotFit(C, 1e6, 81)
        for order, (angle, noise) in enumerate(zip(theta, rng.normal(0, 1e-9, 81), strict=True)):
            fit.add(float(angle), 8e-5 + float(noise), 1e-9, order)
        estimate = fit.estimate(drift=False)
        assert estimate is not None
        found.append((estimate.x_m, estimate.z_m))
    scatter = np.std(np.array(found), axis=0) * 1e6
    # 400 draws know a standard deviation to 3.5 %; allowed is four times that
    assert scatter == pytest.approx([0.4244, 2.2927], rel=0.14)


def test_an_order_that_goes_out_and_back_is_not_confused_with_drift() -> None:
    theta = sweep(81, 40)
    visited = np.concatenate([theta[::2], theta[1::2][::-1]])
    order = np.arange(81)
    ones = np.full(81, 1e-9)
    for path, most in ((visited, 1.3), (theta, 60.0)):
        found = fit_pivot(path, 1e-7 * order / 81, ones, order, C)
        assert found is not None
        inflation = np.sqrt(found.covariance[0, 0]) * 1e6 / 0.4244
        assert inflation < most
    assert inflation > 40  # one way: some 45 times


# spherical wave from 60 mm, axis of rotation on the axis of the beam: exact arrivals at ±40° for (0.1, 0.1) mm are
# -59.088 and +27.524 ns (worked out with another program)
def spherical(theta: NDArray[np.float64], x: float, z: float, distance: float, aside: float) -> NDArray[np.float64]:
    across = x * np.cos(theta) + z * np.sin(theta) + aside
    return np.asarray(np.hypot(distance + z * np.cos(theta) - x * np.sin(theta), across) / C)


def test_arrivals_of_a_spherical_wave() -> None:
    arrival = spherical(np.radians([40.0, -40.0, 0.0]), 1e-4, 1e-4, 0.06, 0.0) * 1e9
    assert arrival[:2] - arrival[2] == pytest.approx([-59.088, 27.524], abs=2e-3)


@pytest.mark.parametrize(("x", "z"), [(1e-4, 1e-4), (0.0, 1e-3), (1e-3, 0.0), (-1e-3, 9e-4), (2e-3, -1e-3)])
@pytest.mark.parametrize("half", [30, 45, 60])
def test_the_curved_wave_is_put_right(x: float, z: float, half: float) -> None:
    # the element stands on the axis of the beam at angle zero, so the axis of rotation stands beside it by -x
    distance, theta = 0.1, sweep(91, half)
    visited = np.concatenate([theta[::2], theta[1::2][::-1]])
    arrival = spherical(visited, x, z, distance, -x)
    wave = Wave(np.ones(1), 1 / (distance + z), np.zeros(1), np.ones(1), 0.0)

    def late(x_m: float, z_m: float) -> NDArray[np.float64]:
        aside, along = swing(visited, x_m, z_m)
        return (wave.path_m(aside, along) - along) / C

    found = fit_pivot(visited, arrival, np.full(91, 1e-11), np.arange(91), C, late)
    plane = fit_pivot(visited, arrival, np.full(91, 1e-11), np.arange(91), C)
    assert found is not None
    assert plane is not None
    off = np.hypot(found.x_m - x, found.z_m - z)
    # z²/R in z, and less in x, where the wave is taken for plane; what is left is of third order in the offset
    assert off < 0.06 * np.hypot(plane.x_m - x, plane.z_m - z) + 1e-9
