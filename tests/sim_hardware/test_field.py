"""The summed field against closed forms and published values."""

from collections.abc import Sequence

import numpy as np
import pytest

from sim_hardware.field import SourceShape, relative_pressure
from sim_hardware.field_grid import FieldGrid, harmonic_orders

SPEED = 1482.4
WAVENUMBER = 2 * np.pi * 5e6 / SPEED
PISTON = SourceShape(radius_m=5e-3, focal_m=None, beam_exponent=0.75, reference_m=0.1)
BOWL = SourceShape(radius_m=10e-3, focal_m=40e-3, beam_exponent=0.75, reference_m=0.04)


def pressure(shape: SourceShape, r_mm: Sequence[float], z_mm: Sequence[float], order: float = 1) -> np.ndarray:
    r, z = np.broadcast_arrays(np.array(r_mm) * 1e-3, np.array(z_mm) * 1e-3)
    return relative_pressure(shape, order * WAVENUMBER, order, r, z)


def test_a_plane_piston_on_its_axis() -> None:
    # 2 |sin(k/2 (sqrt(z^2 + a^2) - z))|, exact.
    z = np.array([10, 20, 40, 60, 84.2486, 100, 150, 200, 300])
    edge = np.hypot(z, 5) - z
    expected = 2 * np.abs(np.sin(WAVENUMBER * edge * 1e-3 / 2))
    np.testing.assert_allclose(np.abs(pressure(PISTON, [0], list(z))), expected, rtol=1e-3)


def test_a_plane_piston_off_its_axis() -> None:
    # Rayleigh quadrature, computed independently.
    found = np.abs(pressure(PISTON, [1, 2, 3, 5], [168.645]))
    np.testing.assert_allclose(found, [1.345478, 1.154504, 0.881684, 0.348273], rtol=1e-3)
    found = np.abs(pressure(PISTON, [1, 2, 3, 5], [84.249]))
    np.testing.assert_allclose(found, [1.644135, 1.004566, 0.842325, 0.391650], rtol=1e-3)


def test_a_piston_arrives_with_the_phase_of_its_two_waves() -> None:
    # p = exp(-j k z) - exp(-j k sqrt(z^2 + a^2)) on the axis, the factor exp(-j k z) being left out.
    z = np.array([30.0, 80.0, 200.0])
    expected = 1 - np.exp(-1j * WAVENUMBER * (np.hypot(z, 5) - z) * 1e-3)
    np.testing.assert_allclose(pressure(PISTON, [0], list(z)), expected, rtol=0, atol=2e-4)


def test_a_focused_bowl_on_its_axis() -> None:
    # O'Neil, J. Acoust. Soc. Am. 21 (1949) 516, confirmed by independent quadrature.
    z = [20.0, 30, 35, 38, 40, 42, 45, 50, 60]
    expected = np.array([1.884208, 7.736746, 15.046518, 26.005040, 26.918145, 23.931762, 15.957397, 3.428528, 3.912049])
    np.testing.assert_allclose(np.abs(pressure(BOWL, [0], z)), expected, rtol=1e-3)


def test_a_focused_bowl_across_its_focus() -> None:
    # Rayleigh quadrature over the bowl, computed independently.
    found = np.abs(pressure(BOWL, [0.1, 0.2, 0.4, 0.6, 0.8, 1.2], [40]))
    np.testing.assert_allclose(found, [25.97956, 23.29368, 14.32327, 4.47897, 2.01219, 1.64039], rtol=1e-3)


@pytest.mark.parametrize("shape", [PISTON, BOWL])
@pytest.mark.parametrize("order", [2, 6, 12])
def test_harmonics_have_beams_narrower_by_the_given_power(shape: SourceShape, order: int) -> None:
    r = np.linspace(0, 8, 3201)
    z = [shape.reference_m * 1e3]

    def half_width(n: int) -> float:
        p = np.abs(pressure(shape, list(r), z, n))
        return float(np.interp(-0.5 * p[0], -p[: int(np.argmax(p < 0.4 * p[0]))], r[: int(np.argmax(p < 0.4 * p[0]))]))

    # a beam bent as the drive's has not quite its shape near the last maximum, which is at 84 mm here
    assert half_width(order) == pytest.approx(half_width(1) * order**-0.75, rel=0.01 if shape is BOWL else 0.07)


@pytest.mark.parametrize("exponent", [0.6, 0.75, 0.9])
@pytest.mark.parametrize("order", [2, 5, 12])
def test_harmonics_are_bent_as_the_wave_out_of_which_they_grow(exponent: float, order: int) -> None:
    shape = SourceShape(radius_m=3e-3, focal_m=None, beam_exponent=exponent, reference_m=0.06)

    def bend(n: int) -> float:
        k, r = n * WAVENUMBER, 0.2 / n**0.5
        p = pressure(shape, [0, r], [60.0], n).astype(complex) * np.exp(-1j * k * np.hypot([0, r], 60.0) * 1e-3)
        return float(-2 * np.angle(p[1] / p[0]) / k / (r * 1e-3) ** 2)

    assert bend(order) == pytest.approx(bend(1), rel=0.03)


def test_orders_stand_still_around_each_harmonic_and_never_fall() -> None:
    multiples = np.linspace(0, 6, 601)
    orders = harmonic_orders(multiples)
    near = np.abs(multiples - np.round(multiples)) < 0.24
    np.testing.assert_allclose(orders[near], np.maximum(np.round(multiples[near]), 1))
    assert np.all(np.diff(orders) >= 0)


@pytest.mark.parametrize(("shape", "widest_mm"), [(PISTON, 8.0), (BOWL, 2.5)])
def test_interpolation_agrees_with_the_sum_at_the_place_itself(shape: SourceShape, widest_mm: float) -> None:
    drive = 3e6
    frequencies = np.arange(0, 41, dtype=np.float64) * 0.75e6
    grid = FieldGrid(shape, frequencies, SPEED, drive)
    random = np.random.default_rng(5)
    r = random.uniform(0, widest_mm * 1e-3, 12)
    z = shape.reference_m * random.uniform(0.97, 1.03, 12)
    found = grid.at(r, z)
    for index in (4, 8, 20, 40):
        k, order = 2 * np.pi * frequencies[index] / SPEED, frequencies[index] / drive
        reference = relative_pressure(shape, k, order, np.zeros(1), np.array([shape.reference_m]))
        direct = [relative_pressure(shape, k, order, r[i : i + 1], z[i : i + 1])[0] for i in range(12)]
        np.testing.assert_allclose(found[:, index], np.array(direct) / reference, rtol=0, atol=1e-3)


def test_values_do_not_depend_on_the_way_there() -> None:
    frequencies = np.arange(0, 13, dtype=np.float64) * 0.75e6
    r, z = np.array([1e-3]), np.array([0.1])
    straight = FieldGrid(PISTON, frequencies, SPEED, 3e6)
    wandering = FieldGrid(PISTON, frequencies, SPEED, 3e6)
    for x, y in ((4e-3, 0.08), (0.0, 0.13), (2e-3, 0.1)):
        wandering.at(np.array([x]), np.array([y]))
    np.testing.assert_array_equal(straight.at(r, z), wandering.at(r, z))


def test_only_the_face_itself_counts_for_a_wave_that_does_not_steepen() -> None:
    frequencies = np.arange(0, 13, dtype=np.float64) * 0.75e6
    grid = FieldGrid(PISTON, frequencies, SPEED, 3e6, virtual=False)
    found = grid.at(np.array([0.0]), np.array([0.15]))[0]
    edge = np.hypot(0.15, 5e-3) - 0.15
    on_axis = 1 - np.exp(-2j * np.pi * frequencies / SPEED * edge)
    reference = 1 - np.exp(-2j * np.pi * 3e6 / SPEED * (np.hypot(0.1, 5e-3) - 0.1))
    np.testing.assert_allclose(found[1:], (on_axis / reference)[1:], atol=2e-3)
