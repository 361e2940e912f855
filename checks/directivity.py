"""Directional response of one plane of a rotation: levels, half-angles, angle zero."""

from __future__ import annotations

from collections.abc import Callable, Sequence
from dataclasses import dataclass, replace

import numpy as np
from numpy.typing import NDArray

from checks.arrival import ArrivalTracker
from checks.averaging import W6_TO_W
from checks.element import X_6DB
from checks.errors import MeasurementError
from checks.observation import Circumstances, Observation
from checks.wavefront import BEAM_EXPONENT, WATER_M_S

Vector = NDArray[np.float64]
Complex = NDArray[np.complex128]
USABLE_DB = 20.0  # signal over noise at angle zero that a line needs
REPEATABILITY_FLOOR = 2e-4
FEWEST_ANGLES = 5


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
        components: shape (n, K), as observed; noise_v: shape (n, K), of each part; phase: shape (K,), rad, of the
            components at angle zero once they are turned by the arrival.
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
    components: Complex
    noise_v: Vector
    phase: Vector

    def level_db(self) -> Vector:
        """Level relative to angle zero, shape (n, K), noise bias removed; -inf where nothing is left."""
        with np.errstate(divide="ignore", invalid="ignore"):
            return np.asarray(20 * np.log10(np.abs(self.amplitude / self.reference)))

    def retimed(self, arrival_s: Vector, usable: NDArray[np.bool_]) -> PlaneResponse:
        """The same with other arrivals, shape (n,); levels are read at all of them, `usable` says which were read."""
        turn = np.exp(1j * (2 * np.pi * np.outer(arrival_s, self.frequencies_hz) - self.phase))
        amplitude = (self.components * turn).real
        sigma = np.hypot(self.noise_v, self.repeatability * np.abs(amplitude))
        return replace(self, amplitude=amplitude, sigma=sigma, arrival_s=arrival_s, arrival_usable=usable)


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
        components=components[up],
        noise_v=noise[up],
        phase=np.angle(mean),
    )


@dataclass(frozen=True)
class HalfAngle:
    """Where a level is reached on either side, rad, with standard uncertainties; None where it never is.

    `shared_u` is the part that moves both sides outwards or inwards together, apart from that of each.
    """

    left: float | None
    right: float | None
    left_u: float = 0.0
    right_u: float = 0.0
    shared_u: float = 0.0

    @property
    def half_width(self) -> float | None:
        """Half of the full angular width, which an error of angle zero does not move to first order."""
        return None if self.left is None or self.right is None else (self.right - self.left) / 2

    @property
    def half_width_u(self) -> float:
        """Standard uncertainty of the half width."""
        return float(np.hypot(np.hypot(self.left_u, self.right_u) / 2, self.shared_u))

    def moved(self, zero: float) -> HalfAngle:
        """From true angles to those of a stage that reads `zero` at normal incidence."""
        left, right = (None if a is None else a + zero for a in (self.left, self.right))
        return replace(self, left=left, right=right)

    def less_sure(self, reference_u: float, level_db: float, pattern: Pattern, zero: float) -> HalfAngle:
        """With the relative standard uncertainty of the level at normal incidence, which both sides share."""
        wanted, step = 10 ** (level_db / 20), 1e-5

        def shared(at: float | None) -> float:
            if at is None:
                return 0.0
            here, there = pattern(np.array([at - zero - step, at - zero + step]))
            return reference_u * wanted * 2 * step / max(abs(float(there - here)), 1e-12)

        return replace(self, shared_u=(shared(self.left) + shared(self.right)) / 2)

    def in_doubt(self, radius_u: float) -> HalfAngle:
        """With a relative standard uncertainty of what the angles say of the radius: k a sin(angle) is fixed."""
        if self.half_width is None:
            return self
        return replace(self, shared_u=float(np.hypot(self.shared_u, radius_u * np.tan(self.half_width))))

    @property
    def middle(self) -> float | None:
        """Middle of the two: the angle zero as this level sees it."""
        return None if self.left is None or self.right is None else (self.right + self.left) / 2


Pattern = Callable[[Vector], Vector]  # true angle, rad, to the response over that at normal incidence


def half_angle(
    plane: PlaneResponse, line: int, level_db: float, pattern: Pattern | None = None, zero: float = 0.0
) -> HalfAngle:
    """First crossing of a level on each side of angle zero at one frequency.

    The level counts from normal incidence, which the stage reads as `zero`. Between the points the response goes along
    `pattern`, the departure of the data from it along straight lines: so a step that is coarse for this frequency
    costs little. Without a pattern it goes along a cubic spline.
    """
    theta, ratio, sigma = _averaged(plane, line)
    if pattern is None:
        from scipy.interpolate import CubicSpline

        normal = float(CubicSpline(theta, ratio)(zero))
        return HalfAngle(*_both(theta - zero, ratio / normal, sigma / normal, level_db, None)).moved(zero)
    at_stage_zero = float(pattern(np.array([-zero]))[0])
    share = plane.reference_sigma[line] / abs(plane.reference[line])
    found = _both(theta - zero, ratio * at_stage_zero, sigma, level_db, pattern)
    return HalfAngle(*found).moved(zero).less_sure(share, level_db, pattern, zero)


def _averaged(plane: PlaneResponse, line: int) -> tuple[Vector, Vector, Vector]:
    """Angles once each, ratio to the reference and its standard uncertainty; repeats averaged."""
    ratio = plane.amplitude[:, line] / plane.reference[line]
    sigma = plane.sigma[:, line] / abs(plane.reference[line])
    rows = np.isfinite(ratio)
    theta, place, count = np.unique(np.round(plane.theta[rows], 8), return_inverse=True, return_counts=True)
    mean = np.bincount(place, ratio[rows]) / count
    spread = np.sqrt(np.bincount(place, sigma[rows] ** 2)) / count
    return theta, mean, spread


def _both(
    theta: Vector, ratio: Vector, sigma: Vector, level_db: float, pattern: Pattern | None
) -> tuple[float | None, float | None, float, float]:
    """Left and right crossing and their uncertainties, from true angles."""
    right, right_u = _crossing(theta, ratio, sigma, level_db, pattern)
    left, left_u = _crossing(-theta[::-1], ratio[::-1], sigma[::-1], level_db, pattern)
    return None if left is None else -left, right, left_u, right_u


def _crossing(
    theta: Vector, ratio: Vector, sigma: Vector, level_db: float, pattern: Pattern | None
) -> tuple[float | None, float]:
    """Smallest positive angle at which the ratio falls through the level, and its uncertainty."""
    from scipy.interpolate import CubicSpline

    wanted = 10 ** (level_db / 20)
    along: Pattern = pattern or CubicSpline(theta, ratio)
    root = _first_root(lambda at: along(at) - wanted, theta)
    if root is None:
        return None, 0.0
    step = 1e-4
    here, there = along(np.array([root - step, root + step]))
    slope = min((float(there) - float(here)) / (2 * step), -1e-9)
    moved = 0.0
    if pattern is not None:
        # a pattern tells without noise where to look; the data beside that place tell how far off it is
        moved = -float(np.interp(root, theta, ratio - pattern(theta))) / slope
    i = int(np.clip(np.searchsorted(theta, root), 1, theta.size - 1))
    share = (root - theta[i - 1]) / (theta[i] - theta[i - 1])
    return root + moved, float(np.hypot((1 - share) * sigma[i - 1], share * sigma[i])) / -slope


def _first_root(excess: Pattern, theta: Vector) -> float | None:
    """Smallest positive angle, within the angles measured, at which `excess` falls through zero."""
    from scipy.optimize import brentq

    fine = np.linspace(0.0, float(theta[-1]), 16 * theta.size)
    value = excess(fine)
    fallen = np.nonzero((value[:-1] > 0) & (value[1:] <= 0))[0]
    if value[0] <= 0 or not fallen.size:
        return None
    i = int(fallen[0])
    return float(brentq(lambda at: float(excess(np.array([at]))[0]), fine[i], fine[i + 1]))


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
