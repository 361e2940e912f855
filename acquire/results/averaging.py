"""What averaging over the face does to each harmonic of a beam, from the lines of a raster through its peak."""

from __future__ import annotations

from collections.abc import Mapping, Sequence
from dataclasses import dataclass

import numpy as np
from numpy.typing import NDArray

from acquire.results.quantity import Quantity
from checks.averaging import radius_by_criterion
from checks.averaging_bias import Bias, bias_of, statement
from checks.beam import width_of
from checks.errors import MeasurementError
from checks.observation import Circumstances, Observation
from checks.water import speed_of_sound

Array = NDArray[np.float64]
CLEAR_DB = 20.0  # signal over noise at the peak that a harmonic needs
STEPS_ACROSS = 3.0  # of the raster in a -6 dB width; with fewer the width is the spline's more than the beam's


@dataclass(frozen=True)
class Line:
    """A line of a raster through the largest level.

    Attributes:
        rows: numbers of the points, shape (n,). place_m: where they are along it. scatter_m: rms error of that.
    """

    rows: NDArray[np.intp]
    place_m: Array
    scatter_m: float

    @property
    def step_m(self) -> float:
        """Largest distance between neighbours."""
        return float(np.diff(np.sort(self.place_m)).max())


@dataclass(frozen=True)
class Averaging:
    """Biases of the harmonics; `too_coarse` is the step, m, where there are others that it is too large for."""

    biases: tuple[HarmonicBias, ...] = ()
    too_coarse: float | None = None


@dataclass(frozen=True)
class HarmonicBias:
    """Bias of one harmonic along one axis; `largest_radius_m` by the criterion of IEC 62127-1."""

    harmonic: int
    frequency_hz: float
    axis: str
    bias: Bias
    largest_radius_m: float


def averaging_of(points: Sequence[Observation], lines: Mapping[str, Line], c: Circumstances) -> Averaging:
    """Every harmonic that stands clear of the noise and is sampled well, by axis, with the nominal radius."""
    speed = speed_of_sound(float(np.mean([o.temperature_c for o in points])))
    found, too_coarse = [], None
    for number, frequency in enumerate(float(f) for f in c.frequencies_hz):
        largest = radius_by_criterion(speed / frequency, c.source_radius_m, c.distance_m)
        for axis, line in lines.items():
            level = np.array([abs(points[i].components[number]) for i in line.rows])
            noise = np.array([points[i].component_noise_v[number] for i in line.rows])
            if 20 * np.log10(level.max() / max(float(np.median(noise)), 1e-300)) < CLEAR_DB:
                continue
            bias = _bias(line, level, noise, c.nominal_radius_m)
            if isinstance(bias, Bias):
                found.append(HarmonicBias(round(frequency / c.drive_hz), frequency, axis, bias, largest))
            elif bias == "coarse":
                too_coarse = max(too_coarse or 0.0, line.step_m)
    return Averaging(tuple(found), too_coarse)


def _bias(line: Line, level: Array, noise: Array, radius_m: float) -> Bias | str | None:
    """The bias; "coarse" where the steps are too large for it, None where the beam is wider than the line."""
    order = np.argsort(line.place_m)
    place, level, noise = line.place_m[order], level[order], noise[order]
    try:
        # a point that stands off by so much reads another level
        sigma = np.hypot(noise, np.gradient(level, place) * line.scatter_m)
        width = width_of(place, level, sigma)
    except (MeasurementError, ValueError):
        return None
    if width.width_m < STEPS_ACROSS * line.step_m:
        return "coarse"
    return bias_of(place, level, sigma, width, radius_m)


def averaging_statement(averaging: Averaging) -> str:
    """A sentence on the highest harmonic that can be told of, along the axis where it is worst."""
    coarse = ""
    if averaging.too_coarse is not None:
        step = f"{averaging.too_coarse * 1e3:.3g} mm"
        which = "further harmonics" if averaging.biases else "averaging"
        coarse = f"steps of {step} are too large to tell of {which}: {STEPS_ACROSS:g} in a width are needed"
    if not averaging.biases:
        return coarse or "no harmonic falls to -6 dB on both sides and stands clear of the noise"
    worst = _worst(averaging.biases)
    told = statement(worst.bias, worst.harmonic, worst.frequency_hz, worst.largest_radius_m)
    return f"{told}; {coarse}" if coarse else told


def _worst(biases: Sequence[HarmonicBias]) -> HarmonicBias:
    return max(biases, key=lambda b: (b.harmonic, b.bias.low_db))


def averaging_quantities(averaging: Averaging) -> list[Quantity]:
    """The sentence with its number, then every harmonic."""
    biases, told = averaging.biases, averaging_statement(averaging)
    if not biases:
        return [Quantity("averaging", None, "dB", None, {}, told)]
    worst = _worst(biases)
    where: dict[str, float | str] = {"frequency_hz": worst.frequency_hz, "axis": worst.axis}
    found = [Quantity("averaging", *_low(worst), where, told)]
    for b in biases:
        at: dict[str, float | str] = {"frequency_hz": b.frequency_hz, "axis": b.axis}
        method = "profile before averaging fitted to the line, nominal radius; an estimate, nothing was corrected"
        if not b.bias.resolved:
            method = "the element hides the beam: at least this; nothing was corrected"
        u = b.bias.widening_u if b.bias.resolved else None
        found += [
            Quantity("peak read low by averaging", *_low(b), at, method),
            Quantity("width read over true width", b.bias.widening, "1", u, at, method),
        ]
    for frequency in sorted({b.frequency_hz for b in biases}):
        largest = next(b.largest_radius_m for b in biases if b.frequency_hz == frequency)
        method = "lambda/(8 a1) sqrt(l² + a1²), the criterion of IEC 62127-1"
        found.append(Quantity("largest acceptable radius", largest, "m", None, {"frequency_hz": frequency}, method))
    return found


def _low(b: HarmonicBias) -> tuple[float, str, float | None]:
    u = 20 / np.log(10) * b.bias.share_u / b.bias.share
    return b.bias.low_db, "dB", float(u) if b.bias.resolved else None
