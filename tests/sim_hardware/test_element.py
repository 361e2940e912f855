"""The element's response, summed over its face, against the closed form and a plain double sum."""

from typing import Literal

import numpy as np
import pytest
from hypothesis import given, settings
from hypothesis import strategies as st
from scipy.special import j1

from sim_hardware.capture import Carriage
from sim_hardware.element import Element
from sim_hardware.field import SourceShape
from sim_hardware.field_grid import FieldGrid
from sim_hardware.geometry import Mount
from sim_hardware.truth import Bubble, ElementTruth, MechanicsTruth

Edge = Literal["rigid", "soft", "unbaffled"]
SPEED = 1482.4
DRIVE = 2e6
FREQUENCIES = np.arange(0, 81, dtype=np.float64) * 0.5e6
FAR = SourceShape(radius_m=0.5e-3, focal_m=None, beam_exponent=1.0, reference_m=10.0)
FAR_FIELD = FieldGrid(FAR, FREQUENCIES, SPEED, DRIVE, virtual=False)
MOUNT = Mount(MechanicsTruth())


def response(truth: ElementTruth, angle_deg: float, bubbles: tuple[Bubble, ...] = ()) -> np.ndarray:
    placement = MOUNT.place(Carriage(0, 0, 10.0, np.radians(angle_deg), 0))
    return Element(truth, FREQUENCIES).response(placement, FAR_FIELD, SPEED, bubbles).spectrum


def directivity(truth: ElementTruth, angle_deg: float) -> np.ndarray:
    ratio: np.ndarray = (response(truth, angle_deg) / response(truth, 0))[1:]
    return ratio


def disc(radius_mm: np.ndarray | float, angle_deg: float) -> np.ndarray:
    x = 2 * np.pi * FREQUENCIES[1:] / SPEED * radius_mm * 1e-3 * np.sin(np.radians(angle_deg))
    return np.asarray(2 * j1(x) / x)


@pytest.mark.parametrize("radius_mm", [0.05, 0.2, 0.6])
@pytest.mark.parametrize("angle_deg", [3.0, -25.0, 60.0, 85.0])
def test_a_rigid_disc_far_away_responds_as_the_closed_form(radius_mm: float, angle_deg: float) -> None:
    # 2 J1(x)/x, x = k a sin(theta), textbook; what is left is the curvature of the wave over the face.
    found = directivity(ElementTruth(radius_mm=radius_mm), angle_deg)
    np.testing.assert_allclose(found, disc(radius_mm, angle_deg), rtol=0, atol=4e-4)


@pytest.mark.parametrize("angle_deg", [20.0, 50.0, 80.0])
def test_edges_make_what_the_angle_of_incidence_says(angle_deg: float) -> None:
    cosine = np.cos(np.radians(angle_deg))
    factors: dict[Edge, float] = {"rigid": 1.0, "soft": cosine, "unbaffled": (1 + cosine) / 2}
    for edge, factor in factors.items():
        found = directivity(ElementTruth(radius_mm=0.2, edge=edge), angle_deg)
        np.testing.assert_allclose(found, factor * disc(0.2, angle_deg), rtol=0, atol=4e-4)


def test_a_soft_edge_hears_nothing_from_behind() -> None:
    assert np.abs(response(ElementTruth(edge="soft"), 120.0)).max() == 0


def test_the_effective_radius_falls_with_frequency_as_given() -> None:
    found = directivity(ElementTruth(radius_mm=0.1, radius_term_mm_mhz=0.3), 35.0)
    radius = np.hypot(0.1, 0.3 / (FREQUENCIES[1:] * 1e-6))
    np.testing.assert_allclose(found, disc(radius, 35.0), rtol=0, atol=4e-4)


@given(st.floats(-70, 70), st.sampled_from(["rigid", "soft", "unbaffled"]))
@settings(max_examples=20, deadline=None)
def test_a_centred_element_hears_both_sides_alike(angle_deg: float, edge: Edge) -> None:
    truth = ElementTruth(radius_mm=0.3, edge=edge)
    np.testing.assert_allclose(response(truth, angle_deg), response(truth, -angle_deg), rtol=0, atol=1e-5)


@pytest.mark.parametrize("angle_deg", [3.0, 28.0])
def test_near_the_source_it_agrees_with_a_plain_sum_over_both_faces(angle_deg: float) -> None:
    shape = SourceShape(radius_m=5e-3, focal_m=None, beam_exponent=1.0, reference_m=0.06)
    mount = Mount(MechanicsTruth(pivot_offset_mm=(0.2, 0.1, 0.3)))
    placement = mount.place(Carriage(0.5e-3, -0.3e-3, 0.06, np.radians(angle_deg), 0.4))
    found = Element(ElementTruth(radius_mm=1.0), FREQUENCIES).response(
        placement, FieldGrid(shape, FREQUENCIES, SPEED, DRIVE, virtual=False), SPEED
    )

    def sunflower(count: int, radius: float) -> np.ndarray:
        """Points that share a disc evenly: a route to the mean that has nothing in common with Gauss rules."""
        i = np.arange(count) + 0.5
        turn = i * np.pi * (3 - np.sqrt(5))
        points: np.ndarray = radius * np.sqrt(i / count)[:, None] * np.column_stack([np.cos(turn), np.sin(turn)])
        return points

    uv = sunflower(400, 1e-3)
    face = placement.centre + uv[:, :1] * placement.across + uv[:, 1:] * placement.upward
    source = np.pad(sunflower(9000, 5e-3), ((0, 0), (0, 1)))
    distance = np.linalg.norm(face[:, None, :] - source, axis=2)
    away = np.linalg.norm(placement.centre)
    for index in (4, 8, 16):
        k = 2 * np.pi * FREQUENCIES[index] / SPEED
        plain = (1j * k / 2 * (5e-3) ** 2 * np.exp(-1j * k * distance) / distance).mean() * np.exp(1j * k * away)
        k_drive = 2 * np.pi * DRIVE / SPEED
        reference = 1 - np.exp(-1j * k_drive * (np.hypot(0.06, 5e-3) - 0.06))
        # The plain sum is good to about half a per cent of the axial pressure.
        assert abs(found.spectrum[index] - plain / reference) < 8e-3
    assert found.distance_m == pytest.approx(away)


def test_a_bubble_takes_away_what_it_covers() -> None:
    truth = ElementTruth(radius_mm=0.4)
    free = np.abs(response(truth, 0.0)[20])
    half = np.abs(response(truth, 0.0, (Bubble(kind="bubble", radius_mm=0.2, onset_s=0),))[20])
    whole = np.abs(response(truth, 0.0, (Bubble(kind="bubble", radius_mm=2, onset_s=0),))[20])
    assert half / free == pytest.approx(0.75, abs=0.06)
    assert whole == 0
