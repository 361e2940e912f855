"""One plane of a rotation: pivot offset, angle zero, effective radii and edge behaviour, from arrivals and levels.

They hang together: what the face hears of a bent wave depends on its radius and edge, and where the element stands
in the beam on the pivot offset. So offset and radii are fitted in turn, each with what the other has found. What
is not known of the wave is varied, and what that does to the result is its model uncertainty.
"""

from __future__ import annotations

from collections.abc import Sequence
from dataclasses import dataclass, replace
from functools import partial
from math import sqrt

import numpy as np
from numpy.typing import NDArray

from checks.bent_wave import Wave, face_delay, heard, plain, swing, wave_of
from checks.directivity import HalfAngle, PlaneResponse, half_angle
from checks.element import EDGES, Edge, response
from checks.observation import Circumstances
from checks.pivot import PivotEstimate, fit_pivot
from checks.radius import (
    AngleRadius,
    RadiusFit,
    RadiusLaw,
    fit_edge,
    fit_edges,
    fit_law,
    in_doubt,
    radii_from_angles,
    told_apart,
)
from checks.uncertainty import Input
from checks.wavefront import BEAM_EXPONENT, SOURCE_U

Vector = NDArray[np.float64]
LEVELS_DB = (-3.0, -6.0)
ROUNDS = 3
EXPONENT_U = 0.087  # of the width of harmonics: -0.6 to -0.9, rectangular; between quasi-linear and linear
CLEAR = 5.0  # of the noise: below it no arrival can be read
FAR = 6.0  # standard deviations of the arrivals: farther off it is another half cycle, or none
MOST_MOVED = 2.0  # standard uncertainties of the exponent: more is no beam of harmonics
NEAR_NULL = 0.1  # of an arrival's correction for the face, taken as known no better; it grows towards a null


@dataclass(frozen=True)
class Doubt:
    """Something of the wave that is not known: as it was taken, and what one standard uncertainty does to the radii."""

    what: str
    unit: str
    given: Input
    radius_moved_m: Vector


@dataclass(frozen=True)
class PlaneResult:
    """All that one plane of rotation gives.

    Attributes:
        response: as measured. fitted: as a plane wave would have given it with the element centre on the axis.
        centre_s: shape (n,), arrival of the element centre after that at angle zero as in a plane wave: drift and what
            the real wave does are taken off; NaN where no offset could be fitted.
        speed_u: relative standard uncertainty of the speed of sound.
        doubts: what is not known of the wave.
    """

    response: PlaneResponse
    fitted: PlaneResponse
    halves: dict[tuple[int, float], HalfAngle]  # line, level in dB
    fits: list[RadiusFit]  # best first
    by_angles: list[AngleRadius]
    law: RadiusLaw | None
    pivot: PivotEstimate | None
    centre_s: Vector
    speed_m_s: float
    speed_u: float
    doubts: tuple[Doubt, ...] = ()

    @property
    def best(self) -> RadiusFit:
        """Fit of the edge behaviour that describes the data best."""
        return self.fits[0]

    @property
    def edge_is_known(self) -> bool:
        """Whether the data tell the edge behaviours apart."""
        return told_apart(self.fits)


def fit_plane(measured: PlaneResponse, c: Circumstances, speed_m_s: float, delays: dict[int, float]) -> PlaneResult:
    """Fit one plane.

    `delays` has for the index of each point how long sound took to the middle of the scan at its temperature, s.

    Raises:
        MeasurementError: no usable frequency.
    """
    plane = _Plane(measured, c, speed_m_s, np.array([delays[int(i)] for i in measured.order]))
    wave, exponent = wave_of(c, speed_m_s), BEAM_EXPONENT
    fits = fit_edges(measured, speed_m_s, c.nominal_radius_m)
    for _ in range(ROUNDS):
        pivot = plane.pivot(wave, fits[0])
        if pivot is not None:
            plane = plane.resolved(wave, fits[0], pivot)
        fits = plane.radii(wave, fits, pivot)
        exponent, exponent_u = plane.exponent(fits[0], pivot, exponent)
        wave = wave_of(c, speed_m_s, exponent=exponent)
    fits = plane.radii(wave, fits, pivot)
    fitted = plane.as_plane_wave(wave, fits[0], pivot)
    centre = plane.centre(wave, fits[0], pivot)
    fits, pivot, doubts = plane.with_doubts(fits, pivot, exponent, exponent_u)
    halves = _half_angles(fitted, fits[0], speed_m_s)
    return PlaneResult(
        response=plane.response,
        fitted=fitted,
        halves=halves,
        fits=fits,
        by_angles=radii_from_angles(fitted, halves, speed_m_s),
        law=fit_law(fits[0], c.speed_u),
        pivot=pivot,
        centre_s=centre,
        speed_m_s=speed_m_s,
        speed_u=c.speed_u,
        doubts=doubts,
    )


def _half_angles(plane: PlaneResponse, fit: RadiusFit, speed_m_s: float) -> dict[tuple[int, float], HalfAngle]:
    """At every usable frequency and level, along the fitted pattern between the points."""
    found = {}
    for j, line in enumerate(np.nonzero(plane.usable)[0]):
        ka = 2 * np.pi * float(fit.frequencies_hz[j]) / speed_m_s * float(fit.radius_m[j])
        pattern = partial(response, ka=ka, edge=fit.edge)
        doubt = float(fit.model_u_m[j] / fit.radius_m[j])
        for level in LEVELS_DB:
            half = half_angle(plane, int(line), level, pattern, fit.angle_zero)
            found[int(line), level] = half.in_doubt(doubt)
    return found


@dataclass(frozen=True)
class _Plane:
    """The data of one plane, and the two halves of the fit."""

    response: PlaneResponse
    c: Circumstances
    speed_m_s: float
    travel_s: Vector  # to the middle of the scan, at the temperature of each point

    def pivot(self, wave: Wave, fit: RadiusFit) -> PivotEstimate | None:
        """The pivot offset, with radius and edge behaviour as in `fit`."""
        r = self.response
        rows = r.arrival_usable
        theta = r.theta[rows]

        def late(x: float, z: float) -> Vector:
            return self._late(theta, wave, fit, x, z)

        unsure = NEAR_NULL * late(0.0, 0.0)
        sigma = np.hypot(r.arrival_sigma_s[rows], unsure)
        time = (r.arrival_s - self.travel_s)[rows]
        first = fit_pivot(theta, time, sigma, r.order[rows], self.speed_m_s, late)
        if first is None:
            return None
        # what jitters with the trigger is the same for all, and must not be taken for a matter of weights
        jitter = sqrt(max(first.residual_sd_s**2 - float(np.median(sigma**2)), 0.0))
        return fit_pivot(theta, time, np.hypot(sigma, jitter), r.order[rows], self.speed_m_s, late)

    def _late(self, theta: Vector, wave: Wave, fit: RadiusFit, x_m: float, z_m: float) -> Vector:
        """What the real wave adds to the arrival of a plane one, s, shape (n,)."""
        aside, along = swing(theta, x_m, z_m)
        radius, c = self._radius_at_drive(fit), self.speed_m_s
        face = face_delay(theta - fit.angle_zero, aside, wave, radius, fit.edge, c)
        return np.asarray((wave.path_m(aside, along) - along) / c + face)

    def resolved(self, wave: Wave, fit: RadiusFit, pivot: PivotEstimate) -> _Plane:
        """With what the offset says of the arrivals: half cycles set right, and a time where none could be read.

        What jitters with the trigger is in the arrival that was read, so that one is kept where it can be true.
        """
        r, c = self.response, self.speed_m_s
        expected = self._besides(wave, fit, pivot) + pivot.arrival_at(r.theta, c)
        half = 0.5 / float(r.frequencies_hz[0])
        read = r.arrival_s + half * np.round((expected - r.arrival_s) / half)
        strong = np.abs(r.components[:, 0]) > CLEAR * r.noise_v[:, 0]
        allowed = np.maximum(FAR * pivot.residual_sd_s, np.abs(self._late(r.theta, wave, fit, 0.0, 0.0)))
        true = strong & (np.abs(read - expected) < np.minimum(allowed, half / 4))
        return replace(self, response=r.retimed(np.where(true, read, expected), true))

    def centre(self, wave: Wave, fit: RadiusFit, pivot: PivotEstimate | None) -> Vector:
        """Arrivals relative to angle zero, without drift and without what the real wave does, s, shape (n,)."""
        r = self.response
        if pivot is None:
            return np.full(r.theta.size, np.nan)
        return np.asarray(r.arrival_s - self._besides(wave, fit, pivot))

    def _besides(self, wave: Wave, fit: RadiusFit, pivot: PivotEstimate) -> Vector:
        """All of an arrival but the swing of the centre in a plane wave, s, shape (n,)."""
        r = self.response
        steady = pivot.arrival_s + pivot.drift_s * pivot.place(r.order) + self.travel_s
        return np.asarray(steady + self._late(r.theta, wave, fit, pivot.x_m, pivot.z_m))

    def radii(self, wave: Wave, fits: Sequence[RadiusFit], pivot: PivotEstimate | None) -> list[RadiusFit]:
        """The radii for each edge behaviour, best first, each with its own idea of what the face hears."""
        before = {fit.edge: fit for fit in fits}
        again = [self._radius(wave, before[edge], pivot) for edge in EDGES]
        return sorted(again, key=lambda f: f.criterion)

    def _radius(self, wave: Wave, fit: RadiusFit, pivot: PivotEstimate | None) -> RadiusFit:
        mended = self.as_plane_wave(wave, fit, pivot)
        return fit_edge(mended, self.speed_m_s, self.c.nominal_radius_m, fit.edge)

    def as_plane_wave(self, wave: Wave, fit: RadiusFit, pivot: PivotEstimate | None) -> PlaneResponse:
        """The response without what the real wave does to it: where the element stands, and across its face.

        What the place does is divided out. What the bend does across the face is taken off, since the response has
        nulls; its size is that of the fit.
        """
        r = self.response
        x, z = (pivot.x_m, pivot.z_m) if pivot else (0.0, 0.0)
        aside, along = swing(r.theta, x, z)
        level = wave.at_centre(aside, along)
        lines = np.nonzero(r.usable)[0]
        theta = r.theta - fit.angle_zero
        used = wave.at_lines(lines)
        face = heard(theta, aside, used, fit.radius_m, fit.edge)
        middle = heard(np.zeros(1), np.zeros(1), used, fit.radius_m, fit.edge)
        late = face_delay(theta, aside, wave, self._radius_at_drive(fit), fit.edge, self.speed_m_s)
        turn = np.exp(1j * np.outer(late, used.wavenumber) * self.speed_m_s)
        change = (face / middle * turn).real - plain(theta, used, fit.radius_m, fit.edge)
        amplitude = r.amplitude / level
        amplitude[:, lines] = amplitude[:, lines] - change * fit.amplitude_v
        return replace(r, amplitude=amplitude, sigma=r.sigma / level)

    def exponent(self, fit: RadiusFit, pivot: PivotEstimate | None, about: float) -> tuple[float, float]:
        """Of the width of the harmonics' beams: what the levels say of it and what is known anyway; with its doubt.

        A narrow beam fills the nulls and widens the lobes, so the fit is good for one exponent only: one step along a
        parabola through three of them about `about`. What is known anyway is a normal distribution about -3/4.
        """
        step = EXPONENT_U / 2
        tried = about + step * np.array([-1.0, 0.0, 1.0])
        fits = [self._radius(wave_of(self.c, self.speed_m_s, exponent=e), fit, pivot) for e in tried]
        chi2 = np.array([f.reduced_chi2 * f.freedom for f in fits])
        cost = chi2 / max(1.0, float(chi2.min()) / fit.freedom) + ((tried - BEAM_EXPONENT) / EXPONENT_U) ** 2
        bend = max(float(cost[0] - 2 * cost[1] + cost[2]) / 2, (step / EXPONENT_U) ** 2)
        moved = step * float(cost[0] - cost[2]) / 4 / bend
        found = about + float(np.clip(moved, -EXPONENT_U, EXPONENT_U))
        most = MOST_MOVED * EXPONENT_U
        return float(np.clip(found, BEAM_EXPONENT - most, BEAM_EXPONENT + most)), step / sqrt(bend)

    def with_doubts(
        self, fits: list[RadiusFit], pivot: PivotEstimate | None, exponent: float, exponent_u: float
    ) -> tuple[list[RadiusFit], PivotEstimate | None, tuple[Doubt, ...]]:
        """The best fit and the offset with what is not known of the wave as further uncertainty, and each doubt."""
        best, c = fits[0], self.c
        radius2, zero2 = np.zeros_like(best.radius_m), 0.0
        offset2 = np.zeros((2, 2))
        if pivot is not None:
            offset2 = c.speed_u**2 * np.outer([pivot.x_m, pivot.z_m], [pivot.x_m, pivot.z_m])
        doubts = []
        for what, unit, given, wave in self._other_waves(exponent, exponent_u):
            other_pivot = self.pivot(wave, best) if pivot is not None else None
            other = self._radius(wave, best, other_pivot)
            doubts.append(Doubt(what, unit, given, other.radius_m - best.radius_m))
            radius2 += (other.radius_m - best.radius_m) ** 2
            zero2 += (other.angle_zero - best.angle_zero) ** 2
            if pivot is not None and other_pivot is not None:
                moved = [other_pivot.x_m - pivot.x_m, other_pivot.z_m - pivot.z_m]
                offset2 += np.outer(moved, moved)
        doubted = replace(
            best,
            radius_u_m=np.sqrt(best.radius_u_m**2 + radius2),
            angle_zero_u=sqrt(best.angle_zero_u**2 + zero2),
            model_u_m=np.sqrt(radius2),
        )
        if pivot is not None:
            pivot = replace(pivot, covariance=pivot.covariance + offset2)
        return in_doubt([doubted, *fits[1:]]), pivot, tuple(doubts)

    def _other_waves(self, exponent: float, exponent_u: float) -> list[tuple[str, str, Input, Wave]]:
        """Each one standard uncertainty from the wave that is taken: its source, its harmonics, its direction.

        How the surroundings of the face answer to a bent wave is not known; between a wave from the middle of the
        source and one along its own bend, rectangular.
        """
        c, speed = self.c, self.speed_m_s
        wave = wave_of(c, speed, exponent=exponent)
        look = Input.within(wave.bend, abs(1 / c.distance_m - wave.bend))
        radius = Input(c.source_radius_m, SOURCE_U * c.source_radius_m)
        return [
            ("source radius", "m", radius, wave_of(c, speed, source=1 + SOURCE_U, exponent=exponent)),
            (
                "exponent of the harmonics' beamwidth", "1", Input(exponent, exponent_u),
                wave_of(c, speed, exponent=exponent + exponent_u),
            ),
            ("bend of the wave at the edge", "1/m", look, replace(wave, facing=wave.bend + look.u)),
        ]  # fmt: skip

    def _radius_at_drive(self, fit: RadiusFit) -> float:
        """Of the lowest usable frequency."""
        return float(fit.radius_m[0])


def edge_words(edge: Edge) -> str:
    """As people say it."""
    return {"rigid": "rigid baffle", "soft": "soft baffle", "unbaffled": "no baffle"}[edge]
