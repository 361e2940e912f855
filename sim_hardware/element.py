"""What the face of the element feels: pressure added up over nodes, each at its true place and time."""

from __future__ import annotations

import math
from dataclasses import dataclass
from functools import lru_cache

import numpy as np
from numpy.typing import NDArray

from sim_hardware.field_grid import STEP, FieldGrid, Patch
from sim_hardware.geometry import Placement
from sim_hardware.truth import Bubble, ElementTruth

Real = NDArray[np.float64]
Single = NDArray[np.float32]
Complex = NDArray[np.complex64]

_ALONG = (8, 12, 16, 24, 32, 48, 64, 96, 128, 192, 256)
_GROUPS = 4


@dataclass(frozen=True)
class FaceResponse:
    """Mean of the pressure over the face.

    Attributes:
        spectrum: shape (F,), over rho c u0, with the delay of the centre left out.
        distance_m: from the centre of the source to the centre of the element.
    """

    spectrum: Complex
    distance_m: float


class Element:
    """A circular element with a way of behaving at its edge and a radius that depends on frequency."""

    def __init__(self, truth: ElementTruth, frequencies: Real) -> None:
        """An element seen at `frequencies`, shape (F,), in Hz, ascending, zero allowed."""
        self._edge = truth.edge
        self._frequencies = frequencies
        term = truth.radius_term_mm_mhz
        # The law has no end at low frequency; below the lowest component of any burst it does not matter.
        f_mhz = np.maximum(frequencies * 1e-6, 0.1)
        self._radii: Real = np.sqrt(truth.radius_mm**2 + (term / f_mhz) ** 2) * 1e-3
        bounds = np.linspace(0, frequencies.size, 2 if term == 0 else _GROUPS + 1, dtype=int)[1:-1]
        self._slices = [
            slice(part[0], part[-1] + 1) for part in np.split(np.arange(frequencies.size), bounds) if part.size
        ]

    def response(
        self, placement: Placement, field: FieldGrid, speed: float, bubbles: tuple[Bubble, ...] = ()
    ) -> FaceResponse:
        """Mean pressure over the face of an element that is placed so, in water of that speed of sound."""
        distance = float(np.linalg.norm(placement.centre))
        arrival = placement.centre / distance
        steepest, level, sine = _face_axes(placement, arrival)
        spectrum = np.empty(self._frequencies.size, np.complex64)
        for part in self._slices:
            radius = float(self._radii[part].mean())
            beam = radius / distance / field.fan_step * STEP
            turns = 2 * math.pi * float(self._frequencies[part.stop - 1]) / speed * radius * sine
            along, across, weight = _disc(_nodes_for(turns + beam), _chord_nodes(beam))
            local = along[:, None] * steepest + across[:, None] * level
            points = placement.centre + radius * local
            share = weight * self._edge_factor(points, placement.normal)
            if bubbles:
                share = share * _uncovered(radius * local, placement, bubbles)
            patch = field.patch(np.hypot(points[:, 0], points[:, 1]), points[:, 2])
            phases = self._phases(part, local, arrival, distance, speed)
            _add_up(patch, share.astype(np.float32), phases, part, spectrum[part])
        return FaceResponse(spectrum=spectrum, distance_m=distance)

    def _phases(self, part: slice, local: Real, arrival: Real, distance: float, speed: float) -> Single:
        """Phase lag of each node against the centre, shape (nodes, F of the part), radians.

        |c + s v| - |c| for nodes v and a radius s is expanded to s^2: the next term is below 1e-8 m for elements
        much smaller than the distance.
        """
        projection = local @ arrival
        bend = ((local**2).sum(axis=1) - projection**2) / (2 * distance)
        wave = 2 * math.pi / speed * self._frequencies[part]
        radii = self._radii[part]
        terms = np.stack([wave * radii, wave * radii**2]).astype(np.float32)
        phases: Single = np.stack([projection, bend], axis=1).astype(np.float32) @ terms
        return phases

    def _edge_factor(self, points: Real, normal: Real) -> Real:
        """What the surroundings of the face make of a wave that meets it at an angle, shape (nodes,)."""
        if self._edge == "rigid":
            return np.ones(len(points))
        cosine: Real = -(points @ normal) / np.linalg.norm(points, axis=1)
        factor: Real = np.maximum(cosine, 0.0) if self._edge == "soft" else (1 + cosine) / 2
        return factor


def _face_axes(placement: Placement, arrival: Real) -> tuple[Real, Real, float]:
    """Directions in the face along which the wave runs and along which it stands, and the sine of incidence."""
    u, v = float(arrival @ placement.across), float(arrival @ placement.upward)
    sine = math.hypot(u, v)
    if sine < 1e-12:
        return placement.across, placement.upward, 0.0
    steepest = (u * placement.across + v * placement.upward) / sine
    level = (u * placement.upward - v * placement.across) / sine
    return steepest, level, sine


def _nodes_for(turns: float) -> int:
    """Nodes along the face for a wave whose phase changes by `turns` radians from the centre to the edge."""
    wanted = turns / 2 + 2 * turns ** (1 / 3) + 5
    return next((n for n in _ALONG if n >= wanted), _ALONG[-1])


def _chord_nodes(turns: float) -> int:
    """Nodes across the face for a field whose phase changes by `turns` radians from the centre to the edge."""
    return min(4 + math.ceil(0.7 * turns), 24)


@lru_cache(maxsize=64)
def _disc(along: int, across: int) -> tuple[Real, Real, Real]:
    """Nodes and weights on the unit disc: Chebyshev of the second kind along, Gauss-Legendre across each chord.

    Chords have the length 2 sqrt(1 - s^2), which is the weight of that rule; the weights sum to one.
    """
    angle = np.arange(1, along + 1) * math.pi / (along + 1)
    s, chord = np.cos(angle), np.sin(angle)
    t, w = np.polynomial.legendre.leggauss(across)
    weight = (2 / (along + 1)) * chord[:, None] ** 2 * w / 2
    return np.repeat(s, across), (chord[:, None] * t).ravel(), weight.ravel()


def _uncovered(local: Real, placement: Placement, bubbles: tuple[Bubble, ...]) -> Real:
    """1 for nodes that feel the water, 0 under a bubble, between the two at its rim."""
    x, y = local @ placement.across * 1e3, local @ placement.upward * 1e3
    free = np.ones(len(local))
    for bubble in bubbles:
        outside = np.hypot(x - bubble.centre_mm[0], y - bubble.centre_mm[1]) / bubble.radius_mm
        free *= np.clip((outside - 0.8) / 0.4, 0.0, 1.0)
    return free


def _add_up(patch: Patch, share: Single, phases: Single, part: slice, total: Complex) -> None:
    """Put into `total` the sum over nodes of share x field x exp(-j phase), by way of the grid's points."""
    weights = (patch.weights * share[:, None]).T
    cosine, sine = weights @ np.cos(phases), weights @ np.sin(phases)
    real, imaginary = patch.real[:, part], patch.imaginary[:, part]
    total.real = (real * cosine + imaginary * sine).sum(axis=0)
    total.imag = (imaginary * cosine - real * sine).sum(axis=0)
