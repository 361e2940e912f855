"""The Cramér-Rao bound of a rotation on one bench, from the simulator alone, and how near the results come to it.

The data are the components of the usable lines at every point. Their noise is white noise and digitising as the
simulator has them, and the jitter of the trigger, which moves all lines of a capture together. How the data follow
offset, angle zero and radius is taken from the simulator by differences; amplitude and phase of each line and a
linear drift of the arrival are free besides, as in the analysis.
"""

from __future__ import annotations

from collections.abc import Iterator
from dataclasses import dataclass, replace
from math import degrees, sqrt

import numpy as np
from numpy.typing import NDArray

from tests.faults.drawn import Drawn, drawn
from tests.faults.in_hand import BITS, Scanned, scanned

Array = NDArray[np.float64]
Complex = NDArray[np.complex128]
STEPS = {"x": 2e-6, "z": 4e-6, "zero": 2e-4, "radius": 1e-6}  # m, m, rad, m
UNITS = {"x": "um", "z": "um", "zero": "mdeg", "radius": "nm"}
SHOWN = {"x": 1e6, "z": 1e6, "zero": degrees(1e3), "radius": 1e9}


@dataclass(frozen=True)
class Reached:
    """Standard deviation of a result over seeds of noise beside the bound, in SI."""

    bench: int
    name: str
    scatter: float
    bound: float
    stated: float

    @property
    def ratio(self) -> float:
        """Scatter over bound."""
        return self.scatter / self.bound


def moved(bench: Drawn, name: str, step: float) -> Drawn:
    """The bench with one true parameter changed."""
    m, element = bench.truth.mechanics, bench.truth.element
    x, y, z = m.pivot_offset_mm
    match name:
        case "x":
            return bench.altered(mechanics={"pivot_offset_mm": [x + step * 1e3, y, z]})
        case "z":
            return bench.altered(mechanics={"pivot_offset_mm": [x, y, z + step * 1e3]})
        case "zero":
            return bench.altered(mechanics={"angle_zero_deg": m.angle_zero_deg + degrees(step)})
    return bench.altered(element={"radius_mm": element.radius_mm + step * 1e3})


def components(scan: Scanned) -> Complex:
    """Shape (points, lines)."""
    return np.array([o.components for o in scan.seen])


def bounds(bench: Drawn, scan: Scanned) -> dict[str, float]:
    """The least standard deviations that any unbiased estimate from these data can have."""
    lines = np.nonzero(scan.results[0].response.usable)[0]
    quiet = components(scanned(bench, noiseless=True))[:, lines]
    slopes = []
    for name, step in STEPS.items():
        above, below = (components(scanned(moved(bench, name, s), noiseless=True))[:, lines] for s in (step, -step))
        slopes.append((above - below) / (2 * step))
    omega = 2 * np.pi * scan.circumstances.frequencies_hz[lines]
    late = -1j * omega * quiet  # by delay
    place = np.linspace(-0.5, 0.5, len(quiet))[:, None]
    own = [np.where(np.arange(lines.size) == k, turn * quiet, 0) for k in range(lines.size) for turn in (1, 1j)]
    jacobian = _real(np.stack([*slopes, late * place, *own], axis=2))
    gradient = _real(late[:, :, None])[:, :, 0]
    noise2, jitter2 = _noise(bench, scan)
    fisher = np.zeros((jacobian.shape[2],) * 2)
    for j, g in zip(jacobian, gradient, strict=True):
        weighted = (j - np.outer(g, g @ j) * jitter2 / (noise2 + jitter2 * float(g @ g))) / noise2
        fisher += j.T @ weighted
    scale = np.sqrt(np.diag(fisher))
    covariance = np.linalg.inv(fisher / np.outer(scale, scale)) / np.outer(scale, scale)
    return {name: sqrt(float(covariance[i, i])) for i, name in enumerate(STEPS)}


def _real(values: Complex) -> Array:
    """Real and imaginary parts one after the other along the second axis."""
    return np.concatenate([values.real, values.imag], axis=1)


def _noise(bench: Drawn, scan: Scanned) -> tuple[float, float]:
    """Variance of a part of a component (V²), and of the arrival of a capture (s²)."""
    e, c = bench.truth.electronics, scan.circumstances
    averages = c.averages
    digit = scan.full_scale_v / 2**BITS
    sample2 = (e.noise_uv * 1e-6) ** 2 / averages + digit**2 / 12
    return 2 * sample2 / (c.gate.stop - c.gate.start), (e.jitter_ns * 1e-9) ** 2 / averages


def reached(family: int, number: int, seeds: int) -> Iterator[Reached]:
    """Scan one bench many times with other noise."""
    bench = drawn(number, family)
    least: dict[str, float] = {}
    found: dict[str, list[float]] = {name: [] for name in STEPS}
    stated: dict[str, list[float]] = {name: [] for name in STEPS}
    for seed in range(seeds):
        again = replace(bench, truth=bench.truth.model_copy(update={"seed": seed}), seed=seed)
        scan = scanned(again)
        least = least or bounds(again, scan)
        result = scan.results[0]
        pivot, radius = result.pivot, scan.one("mean effective radius")
        if pivot is None or radius.value is None or radius.standard_uncertainty is None:
            continue
        values = (pivot.x_m, pivot.z_m, result.best.angle_zero, radius.value)
        spreads = (
            sqrt(pivot.covariance[0, 0]),
            sqrt(pivot.covariance[1, 1]),
            result.best.angle_zero_u,
            radius.standard_uncertainty,
        )
        for name, value, u in zip(STEPS, values, spreads, strict=True):
            found[name].append(value)
            stated[name].append(u)
    for name in STEPS:
        yield Reached(number, name, float(np.std(found[name], ddof=1)), least[name], float(np.mean(stated[name])))


def lines_of(all_of_them: list[Reached]) -> Iterator[str]:
    """For people."""
    yield f"{'bench':>5} {'result':<8} {'scatter':>9} {'bound':>9} {'ratio':>6} {'stated u':>9}"
    for r in all_of_them:
        f = SHOWN[r.name]
        yield (
            f"{r.bench:>5} {r.name:<8} {r.scatter * f:>9.3g} {r.bound * f:>9.3g} {r.ratio:>6.2f} {r.stated * f:>9.3g} "
            f"{UNITS[r.name]}"
        )
    for name in STEPS:
        ratios = [r.ratio for r in all_of_them if r.name == name]
        yield f"{name}: median ratio {np.median(ratios):.2f}, largest {max(ratios):.2f}"
