"""Where the element is and which way it looks."""

import numpy as np
import pytest
from hypothesis import given
from hypothesis import strategies as st

from sim_hardware.capture import Carriage
from sim_hardware.geometry import Mount
from sim_hardware.truth import MechanicsTruth

SPEED = 1482.4
angles = st.floats(-np.pi / 2, np.pi / 2)
offsets = st.tuples(*[st.floats(-3, 3)] * 3)


def arrival_ns(offset_mm: tuple[float, float, float], angle_deg: float, distance_m: float) -> float:
    """Arrival at an element that turns about an axis through (0, 0, distance), after that of the axis."""
    mount = Mount(MechanicsTruth(pivot_offset_mm=offset_mm))
    x, y, z = np.array(offset_mm) * 1e-3 + (0, 0, distance_m)
    centre = mount.place(Carriage(x, y, z, np.radians(angle_deg), 0)).centre
    return float((np.linalg.norm(centre) - distance_m) / SPEED * 1e9)


@pytest.mark.parametrize(
    ("dx", "dz", "plus", "minus"),
    [
        (0.10, 0.00, -43.361, 43.361),
        (0.00, 0.10, -15.782, -15.782),
        (0.10, 0.10, -59.143, 27.579),
        (0.05, 0.50, -100.592, -57.230),
    ],
)
def test_arrival_moves_with_the_angle_as_derived(dx: float, dz: float, plus: float, minus: float) -> None:
    # t(theta) = (dz cos - dx sin)/c, plane wave, derived and computed independently; mm and ns, +-40 degrees.
    zero = arrival_ns((dx, 0, dz), 0, 1e4)
    assert arrival_ns((dx, 0, dz), 40, 1e4) - zero == pytest.approx(plus, abs=2e-3)
    assert arrival_ns((dx, 0, dz), -40, 1e4) - zero == pytest.approx(minus, abs=2e-3)


def test_arrival_of_a_spherical_wave_at_60_mm() -> None:
    # -59.088 and +27.524 ns for offsets of 0.1 mm both ways, computed independently.
    zero = arrival_ns((0.1, 0, 0.1), 0, 0.06)
    assert arrival_ns((0.1, 0, 0.1), 40, 0.06) - zero == pytest.approx(-59.088, abs=2e-3)
    assert arrival_ns((0.1, 0, 0.1), -40, 0.06) - zero == pytest.approx(27.524, abs=2e-3)


@pytest.mark.parametrize(
    ("tilt", "theta", "incidence"), [(1, 0, 1.0), (1, 20, 20.0240), (2, 10, 10.1960), (5, 40, 40.2591)]
)
def test_an_axis_that_leans_with_its_sensor_never_meets_the_beam_head_on(
    tilt: float, theta: float, incidence: float
) -> None:
    # cos(alpha) = cos(theta) cos(tau): axis tilted by tau in the plane of the beam and the sensor square to it.
    mount = Mount(MechanicsTruth(axis_tilt_x_deg=tilt))
    square = np.cross(np.array([1.0, 0, 0]), mount.axis)  # the normal that is square to the axis
    placed = mount.place(Carriage(0, 0, 0, np.radians(theta), 0))
    turned = np.column_stack([placed.across, placed.upward, -placed.normal]) @ square
    assert np.degrees(np.arccos(turned[2])) == pytest.approx(incidence, abs=1e-4)


@given(offset=offsets, x=st.floats(-0.01, 0.01), y=st.floats(-0.01, 0.01), z=st.floats(0.01, 0.2))
def test_at_angle_zero_the_element_is_where_the_stage_says(
    offset: tuple[float, float, float], x: float, y: float, z: float
) -> None:
    placed = Mount(MechanicsTruth(pivot_offset_mm=offset)).place(Carriage(x, y, z, 0, 0))
    np.testing.assert_allclose(placed.centre, (x, y, z), atol=1e-15)
    np.testing.assert_allclose(placed.normal, (0, 0, -1), atol=1e-15)


@given(offset=offsets, theta=angles, phi=st.floats(-3, 3), tilt=st.floats(-5, 5), zero=st.floats(-5, 5))
def test_the_element_stays_on_a_sphere_and_its_axes_square(
    offset: tuple[float, float, float], theta: float, phi: float, tilt: float, zero: float
) -> None:
    mechanics = MechanicsTruth(pivot_offset_mm=offset, axis_tilt_x_deg=tilt, axis_tilt_z_deg=-tilt, angle_zero_deg=zero)
    placed = Mount(mechanics).place(Carriage(0, 0, 0.1, theta, phi))
    pivot = np.array([0, 0, 0.1]) - np.array(offset) * 1e-3
    assert np.linalg.norm(placed.centre - pivot) == pytest.approx(np.linalg.norm(offset) * 1e-3, abs=1e-12)
    frame = np.array([placed.across, placed.upward, -placed.normal])
    np.testing.assert_allclose(frame @ frame.T, np.eye(3), atol=1e-12)
    assert np.linalg.det(frame) == pytest.approx(1)


def test_the_roll_turns_the_offset_about_the_sensors_own_axis() -> None:
    mount = Mount(MechanicsTruth(pivot_offset_mm=(1, 0, 0.5)))
    placed = mount.place(Carriage(0, 0, 0, 0, np.pi / 2))
    np.testing.assert_allclose(placed.centre, (-1e-3, 1e-3, 0), atol=1e-12)
    np.testing.assert_allclose(placed.normal, (0, 0, -1), atol=1e-12)


def test_a_zero_error_and_the_same_angle_the_other_way_cancel() -> None:
    placed = Mount(MechanicsTruth(angle_zero_deg=1.5)).place(Carriage(0, 0, 0, np.radians(-1.5), 0))
    np.testing.assert_allclose(placed.normal, (0, 0, -1), atol=1e-12)


def test_a_slip_in_the_holder_turns_with_the_sensor() -> None:
    mount = Mount(MechanicsTruth())
    placed = mount.place(Carriage(0, 0, 0.1, np.pi / 2, 0), shift=np.array([1e-4, 0, 0]))
    np.testing.assert_allclose(placed.centre, (0, 0, 0.1 - 1e-4), atol=1e-12)


def test_positive_tilts_lean_the_axis_as_documented() -> None:
    assert Mount(MechanicsTruth(axis_tilt_x_deg=2)).axis[2] > 0
    assert Mount(MechanicsTruth(axis_tilt_z_deg=2)).axis[0] < 0
