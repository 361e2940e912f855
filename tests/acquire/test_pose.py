import math

import numpy as np
import pytest
from hypothesis import given
from hypothesis import strategies as st

from acquire.pose import Pivot
from acquire.record import Five

millimetres = st.floats(-20e-3, 20e-3)
tilts = st.floats(-0.3, 0.3)
turns = st.floats(-math.pi / 2, math.pi / 2)
pivots = st.builds(Pivot, st.tuples(millimetres, millimetres, millimetres), tilts, tilts)
poses = st.tuples(millimetres, millimetres, st.floats(0.02, 0.3), turns, st.floats(-math.pi, math.pi))


def rotation_about(axis: np.ndarray, angle: float) -> np.ndarray:
    """Matrix exponential of the cross-product matrix: a second route to Rodrigues' formula."""
    from scipy.linalg import expm

    x, y, z = axis
    return np.asarray(expm(angle * np.array([[0, -z, y], [z, 0, -x], [-y, x, 0]])))


@given(pivots, poses)
def test_element_centre_stays_within_a_micrometre_of_where_it_was_sent(pivot: Pivot, pose: Five) -> None:
    # where the mechanics put it, worked out with matrices and not with the code under test
    x, y, z, theta, phi = pivot.carriage_for(pose)
    lean = rotation_about(np.array([0, 0, 1.0]), pivot.tilt_z) @ rotation_about(np.array([1.0, 0, 0]), pivot.tilt_x)
    turn = rotation_about(lean @ np.array([0, 1.0, 0]), theta) @ rotation_about(np.array([0, 0, 1.0]), phi)
    e = np.array(pivot.offset)
    element = np.array([x, y, z]) + turn @ e - e
    assert np.linalg.norm(element - np.array(pose[:3])) < 1e-6


@given(pivots, poses)
def test_carriage_and_element_are_inverse(pivot: Pivot, pose: Five) -> None:
    assert pivot.element_at(pivot.carriage_for(pose)) == pytest.approx(pose, abs=1e-12)


@given(poses)
def test_a_perfect_bench_needs_no_correction(pose: Five) -> None:
    assert Pivot().carriage_for(pose) == pose


def test_the_sign_convention() -> None:
    # X = dx cos + dz sin, Z = -dx sin + dz cos, right-handed turn about y (derived by hand)
    pivot = Pivot(offset=(1e-3, 0.0, 2e-3))
    theta = math.radians(30)
    x, _, z = pivot.swing(theta, 0.0) + np.array(pivot.offset)
    assert x == pytest.approx(1e-3 * math.cos(theta) + 2e-3 * math.sin(theta))
    assert z == pytest.approx(-1e-3 * math.sin(theta) + 2e-3 * math.cos(theta))
