"""Observations of scans made up from closed forms, with a truth that is known.

Element pattern x comb of the source x Gaussian beam x pivot offset x angle zero x drift, plus white noise. The
closed forms are written here once more with scipy, and not taken from the package that is tested.
"""

from __future__ import annotations

from collections.abc import Iterator
from dataclasses import dataclass, replace
from typing import Any

import numpy as np
from numpy.typing import NDArray
from scipy.special import j1, jv

from checks.finding import Change, Check
from checks.live import make_checks
from checks.observation import Circumstances, Gate, Observation, Pose

Vector = NDArray[np.float64]
DRIVE_HZ = 2.25e6
CYCLES = 8
TEMPERATURE_C = 20.0
SPEED = 1482.38  # m/s, Marczak at 20 °C
DISTANCE_M = 0.12
# of the wave of a plane source of 6 mm there (O'Neil's axial pressure and the paraxial wave equation): its bend, and
# the path of its phase along the axis
_STRENGTH = 2 * np.pi * DRIVE_HZ / SPEED * 6e-3**2 / (4 * DISTANCE_M**2)
BEND = _STRENGTH / np.tan(_STRENGTH * DISTANCE_M)
STRETCH = (1 + DISTANCE_M / np.hypot(DISTANCE_M, 6e-3)) / 2


@dataclass(frozen=True)
class Truth:
    """A bench with nothing wrong, unless said otherwise.

    noise_v: standard deviation of the real part of each component. wander: relative, of the amplitude of a point,
    the same for all lines. flutter: relative, of each line by itself. drift_db: over the scan, linear.
    step_m, step_from: the element moves along the beam at that point. echo: level and delay. null: line and depth.
    """

    edge: str = "rigid"
    radius_m: float = 0.2e-3
    pivot_x_m: float = 0.0
    pivot_z_m: float = 0.0
    angle_zero: float = 0.0
    noise_v: float = 2e-6
    jitter_s: float = 5e-11
    wander: float = 3e-4
    flutter: float = 1e-4
    drift_db: float = 0.0
    warming_k: float = 0.0
    step_m: float = 0.0
    step_from: int = 0
    echo_level: float = 0.0
    echo_delay_s: float = 0.0
    null_line: int | None = None
    null_db: float = 0.0
    report_sigma_m: float = 5e-7
    strength_v: float = 0.05


def circumstances(scan_type: str = "rotation", points: int = 180, lines: int = 16, **changes: Any) -> Circumstances:
    """Circumstances of the made-up bench."""
    plain = Circumstances(
        scan_type="rotation" if scan_type == "rotation" else "raster",
        frequencies_hz=DRIVE_HZ * np.arange(1.0, lines + 1),
        side_lines_hz=DRIVE_HZ * np.array([1 - 0.25 / CYCLES, 1 + 0.25 / CYCLES]),
        drive_hz=DRIVE_HZ,
        cycles=CYCLES,
        sample_interval_s=4e-9,
        record_start_s=77e-6,
        gate=Gate(800, 2400, 0, 700),
        averages=16,
        distance_m=DISTANCE_M,
        source_radius_m=6e-3,
        focal_length_m=None,
        nominal_radius_m=0.2e-3,
        reflector_distance_m=0.1,
        highest_wanted_hz=DRIVE_HZ * lines,
        planned_points=points,
    )
    return replace(plain, **changes)


def pattern(theta: Vector, frequency_hz: Vector, radius_m: float, edge: str) -> Vector:
    """Signed response, shape (n, K)."""
    x = np.outer(np.sin(theta), 2 * np.pi * frequency_hz / SPEED * radius_m)
    safe = np.where(x == 0, 1e-9, x)
    factor = {"rigid": np.ones_like(theta), "soft": np.cos(theta), "unbaffled": (1 + np.cos(theta)) / 2}[edge]
    shape: Vector = np.asarray(2 * j1(safe) / safe)
    signed: Vector = shape * factor[:, None]
    return signed


def face_s(theta: Vector, radius_m: float, edge: str) -> Vector:
    """By how much the bent wave is heard later on a turned face than on a straight one, shape (n,).

    First order in the bend: <S²>, <V²> and <S> over the disc under exp(j x S), by Bessel functions (derived).
    """
    k = 2 * np.pi * DRIVE_HZ / SPEED
    x = np.where(theta == 0, 1e-6, k * radius_m * np.sin(theta))
    j2 = jv(2, x)
    deep = np.cos(theta) ** 2 * (2 * j1(x) / x - 6 * j2 / x**2) + 2 * j2 / x**2
    slope = {"rigid": 0 * theta, "soft": -np.tan(theta), "unbaffled": -np.tan(theta / 2)}[edge]
    lean = radius_m * BEND * (np.sin(theta) - slope * np.cos(theta)) * (-2 * j2 / x) / k
    return np.asarray(((radius_m**2 * BEND / 2 * deep + lean) / (2 * j1(x) / x) - radius_m**2 * BEND / 4) / SPEED)


def comb(lines: Vector) -> Vector:
    """Level of harmonic n of a steep wave behind a preamplifier and 120 mm of water, relative."""
    return np.asarray(lines**-1.0 * np.exp(-0.0155 * (lines / 10) ** 2) / np.sqrt(1 + (lines / 27) ** 2))


def rotation_angles(span: float = 80.0, step: float = 0.5) -> Vector:
    """Angles in the order of visiting, rad: every other one upwards, those between downwards."""
    count = round(span / step) + 1
    theta = np.linspace(-span / 2, span / 2, count)
    visited: Vector = np.radians(np.concatenate([theta[::2], theta[1::2][::-1]]))
    return visited


def visits(theta: Vector, every: int = 10) -> list[tuple[float, bool]]:
    """Angles with revisits of angle zero before, between and after."""
    planned: list[tuple[float, bool]] = []
    for i, angle in enumerate(theta):
        if i % every == 0:
            planned.append((0.0, True))
        planned.append((float(angle), abs(angle) < 1e-12))
    return [*planned, (0.0, True)]


def rotation(
    truth: Truth, seed: int, span: float = 80.0, step: float = 0.5, lines: int = 16, every: int = 10
) -> tuple[Circumstances, list[Observation]]:
    """A rotation scan, in the order of capture."""
    planned = visits(rotation_angles(span, step), every)
    c = circumstances(points=len(planned), lines=lines, nominal_radius_m=truth.radius_m)
    theta = np.array([t for t, _ in planned])
    aside = truth.pivot_x_m * np.cos(theta) + truth.pivot_z_m * np.sin(theta) - truth.pivot_x_m
    along = truth.pivot_z_m * (np.cos(theta) - 1) - truth.pivot_x_m * np.sin(theta)
    poses = [Pose(0.0, 0.0, DISTANCE_M, t) for t in theta]
    return c, list(_observed(truth, c, seed, poses, [r for _, r in planned], aside, along))


def raster(
    truth: Truth, seed: int, span_m: float = 8e-3, step_m: float = 0.5e-3
) -> tuple[Circumstances, list[Observation]]:
    """A raster over a Gaussian beam with its peak at x = 0.3 mm, y = -0.2 mm; the middle is revisited."""
    steps = round(span_m / step_m / 2)
    places = np.arange(-steps, steps + 1) * step_m
    planned: list[tuple[float, float, bool]] = []
    for row, y in enumerate(places):
        planned.append((0.0, 0.0, True))
        planned += [(float(x), float(y), False) for x in (places if row % 2 == 0 else places[::-1])]
    planned.append((0.0, 0.0, True))
    c = circumstances("raster", len(planned))
    x = np.array([p[0] for p in planned]) - 0.3e-3
    y = np.array([p[1] for p in planned]) + 0.2e-3
    poses = [Pose(p[0], p[1], DISTANCE_M) for p in planned]
    return c, list(_observed(truth, c, seed, poses, [p[2] for p in planned], np.hypot(x, y), np.zeros(len(planned))))


def beam_radius(lines: Vector) -> Vector:
    """1/e radius of the amplitude of harmonic n across the beam, m: a piston of 6 mm at 120 mm, n^-0.75."""
    width6 = 2 * 2.211785 * DISTANCE_M / (2 * np.pi * DRIVE_HZ / SPEED * 6e-3)
    return np.asarray(width6 / (2 * np.sqrt(0.3 * np.log(10))) * lines**-0.75)


def _observed(
    truth: Truth,
    c: Circumstances,
    seed: int,
    poses: list[Pose],
    references: list[bool],
    aside: Vector,
    along: Vector,
) -> Iterator[Observation]:
    rng = np.random.default_rng(seed)
    count, lines = len(poses), c.frequencies_hz.size
    order = np.arange(count)
    theta = np.array([p.theta for p in poses])
    frequencies = np.concatenate([c.frequencies_hz, c.side_lines_hz])
    n = frequencies / DRIVE_HZ
    turned = theta - truth.angle_zero - aside * BEND
    level = truth.strength_v * comb(n) * pattern(turned, frequencies, truth.radius_m, truth.edge)
    level = level * np.exp(-((aside[:, None] / beam_radius(n)) ** 2)) * (1 / (1 + BEND * along))[:, None]
    if truth.null_line is not None:
        level[:, truth.null_line] *= 10 ** (-truth.null_db / 20)
    drift = 10 ** (truth.drift_db * order / max(1, count - 1) / 20)
    level = level * (drift * (1 + truth.wander * rng.standard_normal(count)))[:, None]
    level = level * (1 + truth.flutter * rng.standard_normal(level.shape))
    stepped = np.where(order >= truth.step_from, truth.step_m, 0.0)
    warm = TEMPERATURE_C + truth.warming_k * order / count
    speed = SPEED + 3.071 * (warm - TEMPERATURE_C)  # slope at 20 °C, IAPWS-95
    path = DISTANCE_M + STRETCH * along + BEND * aside**2 / 2 + stepped
    arrival = path / speed + face_s(turned, truth.radius_m, truth.edge) + truth.jitter_s * rng.standard_normal(count)
    turns = np.exp(-2j * np.pi * np.outer(arrival, frequencies)).astype(np.complex128)
    wave = level * turns
    wave = wave * (1 + truth.echo_level * np.exp(-2j * np.pi * frequencies * truth.echo_delay_s))
    wave = wave + truth.noise_v * (rng.standard_normal(wave.shape) + 1j * rng.standard_normal(wave.shape))
    reports = truth.report_sigma_m * rng.standard_normal((2, count))
    for i, pose in enumerate(poses):
        peak = float(np.abs(wave[i, :lines]).sum())
        yield Observation(
            index=i,
            reference=references[i],
            plane=0,
            commanded=pose,
            reported_before=replace(pose, x=pose.x + reports[0, i]),
            reported_after=replace(pose, x=pose.x + reports[1, i]),
            time_s=0.1 * i,
            temperature_c=float(warm[i]),
            components=wave[i, :lines],
            side_components=wave[i, lines:],
            component_noise_v=np.full(lines, truth.noise_v),
            peak_v=peak,
            trough_v=-peak / 2,
            square_integral_v2s=float((np.abs(wave[i, :lines]) ** 2).sum()) * 1e-6,
            noise_rms_v=truth.noise_v * 30,
            offset_v=0.0,
            clipped_high=0,
            clipped_low=0,
            range_use=0.7,
        )


def run(c: Circumstances, seen: list[Observation], checks: list[Check] | None = None) -> list[Change]:
    """All that the live checks say of a scan."""
    asked = make_checks(c) if checks is None else checks
    said = [change for o in seen for check in asked for change in check.update(o)]
    return said + [change for check in asked for change in check.finish()]


def standing(said: list[Change]) -> dict[str, Change]:
    """The last change of each code that has not been cleared."""
    last: dict[str, Change] = {}
    for change in said:
        if change.action == "cleared":
            last.pop(change.finding.code, None)
        else:
            last[change.finding.code] = change
    return last
