"""Directional response of one plane of a rotation: levels, half-angles, angle zero."""

from __future__ import annotations

from collections.abc import Sequence
from dataclasses import dataclass, replace

import numpy as np
from numpy.typing import NDArray

from checks.arrival import ArrivalTracker
from checks.averaging import W6_TO_W
from checks.element import X_6DB
from checks.errors import MeasurementError
from checks.observation import Circumstances, Observation
from checks.wavefront import WATER_M_S, curvature

Vector = NDArray[np.float64]
USABLE_DB = 20.0  # signal over noise at angle zero that a line needs
REPEATABILITY_FLOOR = 2e-4
FEWEST_ANGLES = 5
BEAM_EXPONENT = -0.75
BEAM_KNOWN = 0.3  # relative uncertainty of a correction by exp(x) is so much of x: the width within 15 %
FARTHEST = 4.0  # (X/w)² beyond which nothing is known of the beam: no larger correction is made


@dataclass(frozen=True)
class PlaneResponse:
    """One plane of rotation, angles ascending; n angles, K frequencies.

    Attributes:
        amplitude: shape (n, K), signed amplitude in volts: the component turned by its expected phase, so that
            noise does not bias it and it is negative in every other side lobe; NaN where no arrival is known.
        sigma: shape (n, K), its standard uncertainty from noise and repeatability.
        reference: shape (K,), amplitude at angle zero. usable: shape (K,), signal over noise is enough.
        repeatability: relative standard deviation of the revisits at the drive frequency.
        arrival_s, arrival_sigma_s, order: shape (n,).
        peak_v, trough_v: shape (n,); reference_peak_v, reference_trough_v: at angle zero.
    """

    plane: int
    phi: float
    theta: Vector
    frequencies_hz: Vector
    amplitude: Vector
    sigma: Vector
    reference: Vector
    reference_sigma: Vector
    usable: NDArray[np.bool_]
    repeatability: float
    arrival_s: Vector
    arrival_sigma_s: Vector
    arrival_usable: NDArray[np.bool_]
    order: NDArray[np.intp]
    peak_v: Vector
    trough_v: Vector
    reference_peak_v: float
    reference_trough_v: float

    def level_db(self) -> Vector:
        """Level relative to angle zero, shape (n, K), noise bias removed; -inf where nothing is left."""
        with np.errstate(divide="ignore", invalid="ignore"):
            return np.asarray(20 * np.log10(np.abs(self.amplitude / self.reference)))


def plane_responses(seen: Sequence[Observation], circumstances: Circumstances) -> list[PlaneResponse]:
    """Responses of all planes; the observations come in the order of capture.

    Raises:
        MeasurementError: too few angles, or no reference point.
    """
    tracker = ArrivalTracker(circumstances)
    # outwards from angle zero, so that a point whose cycle is in doubt has its neighbour before it
    outwards = sorted(seen, key=lambda o: (o.plane, abs(o.commanded.theta), o.index))
    arrivals = {o.index: tracker.update(o) for o in outwards}
    planes = sorted({o.plane for o in seen})
    return [_plane([(o, arrivals[o.index]) for o in seen if o.plane == plane], circumstances) for plane in planes]


def _plane(pairs: list, circumstances: Circumstances) -> PlaneResponse:  # type: ignore[type-arg]
    theta = np.array([o.commanded.theta for o, _ in pairs])
    if np.unique(np.round(theta, 6)).size < FEWEST_ANGLES:
        raise MeasurementError(f"a directional response needs {FEWEST_ANGLES} angles or more")
    frequencies = circumstances.frequencies_hz
    components = np.array([o.components for o, _ in pairs])
    noise = np.array([o.component_noise_v for o, _ in pairs])
    arrival = np.array([a.time_s for _, a in pairs])
    usable_arrival = np.array([a.usable for _, a in pairs])
    turned = components * np.exp(2j * np.pi * np.outer(arrival, frequencies))
    near_zero = np.array([o.reference for o, _ in pairs]) & usable_arrival
    if not near_zero.any():
        near_zero = usable_arrival & (np.abs(theta) <= np.abs(theta).min() + 1e-9)
    if not near_zero.any():
        raise MeasurementError("no point at angle zero has a signal: is the source on, and the gate right?")
    mean = turned[near_zero].mean(axis=0)
    amplitude = (turned * np.exp(-1j * np.angle(mean))).real
    amplitude[~usable_arrival] = np.nan
    repeats = amplitude[near_zero]
    count = repeats.shape[0]
    scatter = float(repeats[:, 0].std(ddof=1) / repeats[:, 0].mean()) if count > 2 else 0.0
    repeatability = max(scatter, REPEATABILITY_FLOOR)
    sigma = np.hypot(noise, repeatability * np.abs(np.nan_to_num(amplitude)))
    reference = repeats.mean(axis=0)
    level = noise[near_zero].mean(axis=0)
    with np.errstate(divide="ignore"):
        usable = 20 * np.log10(np.abs(reference) / level) >= USABLE_DB
    peaks = np.array([(o.peak_v, o.trough_v) for o, _ in pairs])
    up = np.argsort(theta, kind="stable")
    return PlaneResponse(
        plane=pairs[0][0].plane,
        phi=pairs[0][0].commanded.phi,
        theta=theta[up],
        frequencies_hz=frequencies,
        amplitude=amplitude[up],
        sigma=sigma[up],
        reference=reference,
        reference_sigma=np.hypot(level, repeatability * np.abs(reference)) / np.sqrt(count),
        usable=usable,
        repeatability=repeatability,
        arrival_s=arrival[up],
        arrival_sigma_s=np.array([a.standard_uncertainty_s for _, a in pairs])[up],
        arrival_usable=usable_arrival[up],
        order=np.array([o.index for o, _ in pairs])[up],
        peak_v=peaks[up, 0],
        trough_v=peaks[up, 1],
        reference_peak_v=float(peaks[near_zero, 0].mean()),
        reference_trough_v=float(peaks[near_zero, 1].mean()),
    )


@dataclass(frozen=True)
class HalfAngle:
    """Where a level is reached on either side, rad, with standard uncertainties; None where it never is."""

    left: float | None
    right: float | None
    left_u: float = 0.0
    right_u: float = 0.0

    @property
    def half_width(self) -> float | None:
        """Half of the full angular width, which an error of angle zero does not move to first order."""
        return None if self.left is None or self.right is None else (self.right - self.left) / 2

    @property
    def half_width_u(self) -> float:
        """Standard uncertainty of the half width."""
        return float(np.hypot(self.left_u, self.right_u)) / 2

    @property
    def middle(self) -> float | None:
        """Middle of the two: the angle zero as this level sees it."""
        return None if self.left is None or self.right is None else (self.right + self.left) / 2


def half_angle(plane: PlaneResponse, line: int, level_db: float) -> HalfAngle:
    """First crossing of a level on each side of angle zero at one frequency, by a monotone cubic.

    The level counts from normal incidence. Where the stage's zero is off by m, the reference lies below that by
    about level (m/h)² for a half-width h (the main lobe is nearly a parabola in dB; derived), which is put right.
    """
    ratio = plane.amplitude[:, line] / plane.reference[line]
    sigma = plane.sigma[:, line] / abs(plane.reference[line])
    rows = np.isfinite(ratio)
    theta, first = np.unique(np.round(plane.theta[rows], 9), return_index=True)
    means = np.array([ratio[rows][np.abs(plane.theta[rows] - t) < 1e-8].mean() for t in theta])
    spread = sigma[rows][first]
    half = _both(theta, means, spread, level_db)
    if half.middle is None or not half.half_width:
        return half
    off = min(0.5, (half.middle / half.half_width) ** 2)
    return _both(theta, means, spread, level_db * (1 - off))


def _both(theta: Vector, ratio: Vector, sigma: Vector, level_db: float) -> HalfAngle:
    right, right_u = _crossing(theta, ratio, sigma, level_db)
    left, left_u = _crossing(-theta[::-1], ratio[::-1], sigma[::-1], level_db)
    return HalfAngle(None if left is None else -left, right, left_u, right_u)


def _crossing(theta: Vector, ratio: Vector, sigma: Vector, level_db: float) -> tuple[float | None, float]:
    """Smallest positive angle at which the ratio falls through the level, and its uncertainty."""
    from scipy.interpolate import PchipInterpolator

    wanted = 10 ** (level_db / 20)
    side = np.nonzero(theta >= -1e-9)[0]
    below = [i for i in side if ratio[i] < wanted]
    if not below or below[0] == 0 or below[0] == side[0]:
        return None, 0.0
    i = below[0]
    around = slice(max(0, i - 4), i + 4)
    curve = PchipInterpolator(theta[around], ratio[around] - wanted)
    roots = [r for r in curve.roots(extrapolate=False) if theta[i - 1] - 1e-12 <= r <= theta[i] + 1e-12]
    if not roots:
        return None, 0.0
    slope = abs(float(curve.derivative()(roots[0])))
    # the crossing leans on the two points around it and on the reference
    return float(roots[0]), float(np.hypot(sigma[i], sigma[i - 1])) / np.sqrt(2) / max(slope, 1e-12)


def signal_to_noise_db(seen: Observation) -> Vector:
    """Signal over noise of each component, shape (K,), the noise's own share taken off; at least -20 dB."""
    power = np.abs(seen.components) ** 2 - 2 * seen.component_noise_v**2
    noise = 2 * seen.component_noise_v**2
    return np.asarray(10 * np.log10(np.maximum(power, 0.01 * noise) / np.maximum(noise, 1e-300)))


def beam_w(frequencies_hz: Vector, c: Circumstances) -> Vector:
    """1/e radius of the amplitude across the beam at the element, shape of `frequencies_hz`, m; an estimate."""
    k = 2 * np.pi * c.drive_hz / WATER_M_S
    width6 = 2 * X_6DB * c.distance_m / (k * c.source_radius_m) * (frequencies_hz / c.drive_hz) ** BEAM_EXPONENT
    return np.asarray(width6 * W6_TO_W)


def seen_from_the_source(plane: PlaneResponse, x_m: float, z_m: float, c: Circumstances) -> PlaneResponse:
    """The plane as it would be with the element centre on the axis of rotation, for a known pivot offset.

    The turn carries the element sideways by X = ex (cos - 1) + ez sin. So the wave, bent with radius R
    (`checks.wavefront`), meets it under an angle smaller by X/R, and it stands off the middle of the beam, whose
    level falls by exp(-X²/w²). It also goes along the beam by Z = ez (cos - 1) - ex sin, and the wave spreads as
    L/(L + Z). The width is that of a piston's far field, 2 x 2.21 L/(k a), and harmonic n is narrower by n^-3/4,
    between the quasi-linear n^-1/2 and the linear n^-1 (derived; `checks.pivot` has the convention). How well the
    width is known goes into `sigma`, so that points far down the side of the beam lose their weight.
    """
    aside = x_m * (np.cos(plane.theta) - 1) + z_m * np.sin(plane.theta)
    along = z_m * (np.cos(plane.theta) - 1) - x_m * np.sin(plane.theta)
    spread = c.distance_m / (c.distance_m + along)
    off = np.minimum((aside[:, None] / beam_w(plane.frequencies_hz, c)) ** 2, FARTHEST)
    fallen = np.exp(-off) * spread[:, None]
    amplitude = plane.amplitude / fallen
    sigma = np.hypot(plane.sigma / fallen, BEAM_KNOWN * off * np.abs(np.nan_to_num(amplitude)))
    return replace(plane, theta=plane.theta - aside * curvature(c), amplitude=amplitude, sigma=sigma)
