"""Directional response of a disc: roots of Bessel functions, angles, radii from angles, and what the trade knows."""

import numpy as np
import pytest
from hypothesis import given
from hypothesis import strategies as st
from scipy.integrate import quad
from scipy.special import jn_zeros

from checks.element import (
    EDGES,
    X_3DB,
    X_6DB,
    Edge,
    angle_at_level,
    jinc,
    jinc_slope,
    obliquity,
    obliquity_slope,
    radius_from_angle,
    response,
)

C = 1482.4  # m/s
NEVER = None


def ka_of(radius_mm: float, mhz: float) -> float:
    return 2 * np.pi * mhz * 1e6 / C * radius_mm * 1e-3


# arguments of 2 J1(x)/x at exact decibels, from mpmath to 30 digits
@pytest.mark.parametrize(
    ("argument", "decibels"),
    [(0.95045378, -1.0), (1.613741196, -3.0), (2.211785445, -6.0), (2.731378866, -10.0), (3.419739008, -20.0)],
)
def test_arguments_of_the_levels(argument: float, decibels: float) -> None:
    assert 20 * np.log10(jinc(np.array(argument))) == pytest.approx(decibels, abs=1e-6)


def test_constants_of_the_half_angles_are_exact_decibels_and_not_the_rounded_ones() -> None:
    for argument, decibels, rounded in ((X_3DB, -3, 1.62), (X_6DB, -6, 2.22)):
        assert 20 * np.log10(jinc(np.array(argument))) == pytest.approx(decibels, abs=1e-8)
        assert rounded / argument - 1 == pytest.approx(0.0038, abs=2e-4)  # what the rounded factors would cost


def test_nulls_and_side_lobes_are_those_of_j1() -> None:
    assert jinc(jn_zeros(1, 5)) == pytest.approx(np.zeros(5), abs=1e-14)
    assert jinc_slope(jn_zeros(2, 3)) == pytest.approx(np.zeros(3), abs=1e-14)  # lobes stand where J2 is zero
    # side lobes of the circular aperture (table of Airy's pattern): -17.57 and -23.81 dB
    lobes = 20 * np.log10(np.abs(jinc(jn_zeros(2, 2))))
    assert lobes == pytest.approx([-17.570150, -23.811159], abs=1e-5)


@pytest.mark.parametrize("ka", [0.3, 2.0, 9.0])
def test_response_is_the_plane_wave_averaged_over_the_face(ka: float) -> None:
    # the definition: the mean of cos(k x sin theta) over a disc of radius a, by quadrature
    theta = np.radians(33.0)
    mean = quad(lambda u: 4 / np.pi * np.sqrt(1 - u * u) * np.cos(ka * u * np.sin(theta)), 0, 1)[0]
    assert response(np.array([theta]), ka, "rigid")[0] == pytest.approx(mean, abs=1e-8)


# half-angles in degrees at c = 1482.4 m/s, computed with another program (rigid -3, -6; soft -3, -6; unbaffled -3,
# -6). Models: K. A. Wear, C. Baker, P. Miloro 2018, doi 10.1109/TUFFC.2018.2855967 (abstract)
ANGLES: list[tuple[float, float, list[float | None]]] = [
    (0.1, 1, [NEVER, NEVER, 44.2948, 59.3620, 63.7817, 88.5554]),
    (0.1, 5, [49.5934, NEVER, 32.9049, 46.6961, 38.7578, 57.3756]),
    (0.1, 10, [22.3790, 31.4550, 20.2294, 28.4470, 21.2405, 29.8891]),
    (0.1, 40, [5.4619, 7.4960, 5.4282, 7.4555, 5.4450, 7.4757]),
    (0.25, 1, [NEVER, NEVER, 41.1659, 56.4029, 55.8572, 81.1767]),
    (0.25, 5, [17.7332, 24.6746, 16.6304, 23.2153, 17.1621, 23.9301]),
    (0.02, 40, [28.4189, 40.7142, 24.2463, 34.3533, 26.1249, 37.2523]),
    (0.5, 5, [8.7598, 12.0480, 8.6221, 11.8792, 8.6904, 11.9634]),
]


@pytest.mark.parametrize(("radius_mm", "mhz", "degrees"), ANGLES)
def test_half_angles_of_three_edge_behaviours(radius_mm: float, mhz: float, degrees: list[float | None]) -> None:
    edges: tuple[Edge, ...] = ("rigid", "soft", "unbaffled")
    found = [angle_at_level(ka_of(radius_mm, mhz), level, edge) for edge in edges for level in (-3.0, -6.0)]
    for angle, expected in zip(found, degrees, strict=True):
        if expected is None:
            assert angle is None
        else:
            assert angle is not None
            assert np.degrees(angle) == pytest.approx(expected, abs=1e-4)


@pytest.mark.parametrize(("level", "argument"), [(-3.0, X_3DB), (-6.0, X_6DB)])
def test_a_rigid_disc_reaches_a_level_only_when_ka_is_above_its_argument(level: float, argument: float) -> None:
    assert angle_at_level(argument * 0.999, level, "rigid") is None
    reached = angle_at_level(argument * 1.001, level, "rigid")
    assert reached is not None
    assert np.sin(reached) == pytest.approx(1 / 1.001, abs=1e-7)


@given(st.floats(1e-5, 2e-3), st.floats(0.5e6, 60e6), st.sampled_from([-3, -6]))
def test_radius_and_angle_are_inverse(radius: float, hertz: float, level: int) -> None:
    ka = 2 * np.pi * hertz / C * radius
    angle = angle_at_level(ka, float(level), "rigid")
    if angle is None:
        assert ka < (X_3DB if level == -3 else X_6DB) + 1e-9
    else:
        assert radius_from_angle(angle, hertz, C, -3 if level == -3 else -6) == pytest.approx(radius, rel=1e-5)


# radius in mm that the rigid inversion finds when the truth is soft or unbaffled (computed with another program)
@pytest.mark.parametrize(
    ("radius_mm", "mhz", "edge", "a3", "a6"),
    [
        (0.1, 1, "soft", 0.54519, 0.60649),
        (0.1, 5, "unbaffled", 0.12163, 0.12392),
        (0.1, 10, "soft", 0.11011, 0.10955),
        (0.25, 5, "soft", 0.26606, 0.26476),
        (0.02, 40, "unbaffled", 0.02162, 0.02155),
        (0.5, 5, "unbaffled", 0.50396, 0.50349),
    ],
)
def test_a_wrong_edge_behaviour_biases_the_radius_by_known_amounts(
    radius_mm: float, mhz: float, edge: Edge, a3: float, a6: float
) -> None:
    at3, at6 = (angle_at_level(ka_of(radius_mm, mhz), level, edge) for level in (-3.0, -6.0))
    assert at3 is not None
    assert at6 is not None
    assert radius_from_angle(at3, mhz * 1e6, C, -3) * 1e3 == pytest.approx(a3, abs=1.1e-5)
    assert radius_from_angle(at6, mhz * 1e6, C, -6) * 1e3 == pytest.approx(a6, abs=1.1e-5)


@pytest.mark.parametrize("edge", EDGES)
def test_slopes_are_the_derivatives(edge: Edge) -> None:
    theta, h = np.linspace(-1.4, 1.4, 57), 1e-6
    assert obliquity_slope(theta, edge) == pytest.approx(
        (obliquity(theta + h, edge) - obliquity(theta - h, edge)) / (2 * h), abs=1e-8
    )
    assert jinc_slope(9 * theta) == pytest.approx((jinc(9 * theta + h) - jinc(9 * theta - h)) / (2 * h), abs=1e-8)


def test_10_db_angles_that_the_trade_knows() -> None:
    """Common practice, no source: rules of thumb about element sizes.

    A 2 mm element is 10 dB down near 40° at 1 MHz: 40.1° rigid, 38.2° unbaffled, 36.4° soft. At 10 MHz near 3° to 4°:
    3.69°, whatever the edge. A 0.2 mm element is 10 dB down only near 80° at 5 MHz: 80.7° if it is unbaffled; a rigid
    one never is, a soft one already at 60.1°.
    """

    def down(diameter_mm: float, mhz: float, edge: Edge) -> float | None:
        angle = angle_at_level(ka_of(diameter_mm / 2, mhz), -10.0, edge)
        return None if angle is None else float(np.degrees(angle))

    assert down(2, 1, "rigid") == pytest.approx(40, abs=0.5)
    assert [down(2, 1, edge) for edge in EDGES] == pytest.approx([40.12, 38.23, 36.38], abs=0.01)
    assert [down(2, 10, edge) for edge in EDGES] == pytest.approx([3.69, 3.69, 3.69], abs=0.01)
    assert down(0.2, 5, "rigid") is None
    assert down(0.2, 5, "unbaffled") == pytest.approx(80.68, abs=0.01)
    assert down(0.2, 5, "soft") == pytest.approx(60.06, abs=0.01)
