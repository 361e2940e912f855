"""The wave of a circular source about a place on its axis, and what the face of an element hears of it.

A plane wave is an idealisation. The real one is bent, falls off beside the axis and weakens along it; so an element
that the turn carries aside meets it late, weak and under another angle, and even one that only turns about its
centre does not hear what that centre does. To second order beside the axis, with the envelope on the axis as
H. T. O'Neil gives it (1949; for a plane source 2 sin(phi/2) exp(-j phi/2), phi = k a²/2 (1/z - 1/F)), the paraxial
wave equation fixes all of it (derived):

    pressure at r beside the axis, z along it: exp(-r² w - j k (s z + r² C/2) - C z)

with C = k a²/(4 z²) cot(phi/2) - 1/(F - z), w = k² a²/(8 z²), s = (1 + cos of the angle under which the rim is seen)/2.
"""

from __future__ import annotations

from dataclasses import dataclass, replace
from functools import lru_cache
from math import pi, sqrt

import numpy as np
from numpy.typing import NDArray

from checks.element import Edge, jinc, obliquity
from checks.observation import Circumstances
from checks.wavefront import BEAM_EXPONENT, curvature

Vector = NDArray[np.float64]
Complex = NDArray[np.complex128]
FARTHEST = 4.0  # r² w beyond which nothing is known of the beam: no larger correction is made
ACROSS = 6


@dataclass(frozen=True)
class Wave:
    """The wave at K frequencies, about the middle of a scan.

    Attributes:
        wavenumber: shape (K,), rad/m. bend: C, 1/m. taper: w, shape (K,), 1/m².
        stretch: s, path in the phase per path along the axis, shape (K,).
        facing: change of the direction from which the wave comes, per way aside, rad/m; as the bend has it.
    """

    wavenumber: Vector
    bend: float
    taper: Vector
    stretch: Vector
    facing: float

    def at_lines(self, lines: NDArray[np.intp]) -> Wave:
        """The wave at some of its frequencies only."""
        return replace(self, wavenumber=self.wavenumber[lines], taper=self.taper[lines], stretch=self.stretch[lines])

    def at_centre(self, aside: Vector, along: Vector) -> Vector:
        """Amplitude at the element centre over that in the middle, shapes (n,) and (n,) to (n, K)."""
        off = np.minimum(aside[:, None] ** 2 * self.taper, FARTHEST)
        return np.asarray(np.exp(-off) / (1 + self.bend * along)[:, None])

    def path_m(self, aside: Vector, along: Vector) -> Vector:
        """Path of the phase at the drive's frequency, to the element centre less that to the middle, m, shape (n,)."""
        return np.asarray(self.stretch[0] * along + self.bend * aside**2 / 2)


def wave_of(c: Circumstances, speed_m_s: float, source: float = 1.0, exponent: float = BEAM_EXPONENT) -> Wave:
    """The wave of the source that the profile tells of, at the frequencies of the scan.

    Its radius is `source` times that of the profile; the width of harmonic n goes as n to the `exponent`.
    """
    frequencies_hz = c.frequencies_hz
    radius = c.source_radius_m * source
    k = 2 * pi * frequencies_hz / speed_m_s
    drive = 2 * pi * c.drive_hz / speed_m_s
    narrowed = (frequencies_hz / c.drive_hz) ** (-2 * exponent)
    behind = 0.0  # a curved source's rim stands forward of its middle
    if c.focal_length_m is not None:
        behind = c.focal_length_m - sqrt(max(c.focal_length_m**2 - radius**2, 0.0))
    ahead = c.distance_m - behind
    bend = curvature(c, source)
    return Wave(
        wavenumber=k,
        bend=bend,
        taper=(drive * radius / c.distance_m) ** 2 / 8 * narrowed,
        stretch=(1 + ahead / np.sqrt(ahead**2 + radius**2 * (frequencies_hz / c.drive_hz) ** (-2 - 2 * exponent))) / 2,
        facing=bend,
    )


def swing(theta: Vector, x_m: float, z_m: float) -> tuple[Vector, Vector]:
    """Where the turn carries an element centre that is (x, z) off the axis of rotation: aside, along; shape (n,)."""
    return x_m * (np.cos(theta) - 1) + z_m * np.sin(theta), z_m * (np.cos(theta) - 1) - x_m * np.sin(theta)


def heard(theta: Vector, aside: Vector, wave: Wave, radius_m: Vector, edge: Edge) -> Complex:
    """Mean of the wave over the face, relative to that at its centre, shape (n, K).

    Args:
        theta: true angles of incidence on the axis, rad, shape (n,).
        aside: where the centre stands beside the axis, m, shape (n,).
        wave: at K frequencies.
        radius_m: effective radius at each of them, shape (K,).
        edge: how the surroundings of the face behave.
    """
    out = np.empty((theta.size, radius_m.size), np.complex128)
    for line, (k, stretch, taper, radius) in enumerate(
        zip(wave.wavenumber, wave.stretch, wave.taper, radius_m, strict=True)
    ):
        s, v, weight = _disc(int(k * radius / 2 + 2 * (k * radius) ** (1 / 3)) + 8)
        across = radius * s * np.cos(theta)[:, None]
        deep = -radius * s * np.sin(theta)[:, None]
        beside = across**2 + (radius * v) ** 2 + 2 * aside[:, None] * across
        local = theta[:, None] - wave.facing * (aside[:, None] + across)
        phase = k * (stretch * deep + wave.bend * beside / 2)
        level = obliquity(local, edge) * np.exp(-taper * beside - wave.bend * deep)
        out[:, line] = (level * np.exp(-1j * phase)) @ weight
    return out


def plain(theta: Vector, wave: Wave, radius_m: Vector, edge: Edge) -> Vector:
    """What the face would hear of a plane wave, shape (n, K)."""
    x = np.outer(np.sin(theta), wave.wavenumber * radius_m)
    return np.asarray(jinc(x) * obliquity(theta, edge)[:, None])


def face_delay(theta: Vector, aside: Vector, wave: Wave, radius_m: float, edge: Edge, speed_m_s: float) -> Vector:
    """By how much the phase at the first frequency is later than that of the centre, s, shape (n,).

    Counted from what is heard at normal incidence in the middle; a side lobe's turn by half a cycle is taken off.
    """
    first = wave.at_lines(np.zeros(1, np.intp))
    size = np.array([radius_m])
    here = heard(theta, aside, first, size, edge)[:, 0] * np.sign(plain(theta, first, size, edge)[:, 0])
    middle = heard(np.zeros(1), np.zeros(1), first, size, edge)[0, 0]
    return np.asarray(-np.angle(here / middle) / (first.wavenumber[0] * speed_m_s))


@lru_cache(maxsize=64)
def _disc(along: int) -> tuple[Vector, Vector, Vector]:
    """Nodes and weights on half of the unit disc, whose other half is alike; the weights sum to one."""
    from scipy.special import roots_chebyu, roots_legendre

    s, w = roots_chebyu(along)
    t, u = roots_legendre(2 * ACROSS)
    t, u = t[ACROSS:], u[ACROSS:]
    chord = np.sqrt(1 - s**2)
    weight = np.outer(w, u) / w.sum()
    return np.repeat(s, ACROSS), np.outer(chord, t).ravel(), weight.ravel()
