"""Sensitivity of a hydrophone against frequency: table, interpolation, range marks, loading by what follows it."""

from __future__ import annotations

from dataclasses import dataclass, replace

import numpy as np
from numpy.typing import NDArray

from checks.errors import MeasurementError

Floats = NDArray[np.float64]
PA_PER_MICROPASCAL = 1e-6


@dataclass(frozen=True)
class Sensitivity:
    """A table of F lines.

    Attributes:
        frequency_hz: shape (F,), ascending.
        magnitude_v_per_pa: shape (F,), positive.
        phase_rad: shape (F,), unwrapped, in the sense exp(+i w t); None where the table gives none.
        relative_u: shape (F,), relative standard uncertainty of the magnitude.
        phase_u_rad: shape (F,), standard uncertainty of the phase.
        common: share (0 to 1) of each variance that all lines have in common, as a calibration's reference has.
    """

    frequency_hz: Floats
    magnitude_v_per_pa: Floats
    phase_rad: Floats | None
    relative_u: Floats
    phase_u_rad: Floats
    common: float = 0.0

    def __post_init__(self) -> None:
        f, m = self.frequency_hz, self.magnitude_v_per_pa
        columns = [f, m, self.relative_u, self.phase_u_rad]
        columns += [] if self.phase_rad is None else [self.phase_rad]
        if f.ndim != 1 or f.size == 0 or any(c.shape != f.shape for c in columns):
            raise MeasurementError("sensitivity table: columns differ in length or are empty; give one value a line")
        if not all(np.isfinite(c).all() for c in columns):
            raise MeasurementError("sensitivity table: a value is not finite; give numbers in every line")
        if f[0] < 0 or (np.diff(f) <= 0).any():
            raise MeasurementError("sensitivity table: frequencies must ascend from 0 Hz or above")
        if (m <= 0).any() or (self.relative_u < 0).any() or (self.phase_u_rad < 0).any():
            raise MeasurementError("sensitivity table: magnitudes must be above 0, uncertainties at least 0")
        if not 0 <= self.common <= 1:
            raise MeasurementError(f"sensitivity table: common {self.common} given; allowed: 0 to 1")


@dataclass(frozen=True)
class Response:
    """The sensitivity at K frequencies.

    Attributes:
        value: shape (K,) complex, V/Pa; outside the table the value of its nearest end, and only to be used knowingly.
        inside: shape (K,), False where the frequency lies outside the table.
        weights: shape (K, F), share of each table line in the logarithm of the magnitude and in the phase.
        phase_known: whether the table gave phases; otherwise zero is taken.
    """

    value: NDArray[np.complex128]
    inside: NDArray[np.bool_]
    weights: Floats
    phase_known: bool


def sensitivity_of(
    frequency_hz: Floats,
    magnitude_v_per_pa: Floats,
    phase_rad: Floats | None = None,
    relative_u: Floats | float = 0.0,
    phase_u_rad: Floats | float = 0.0,
    common: float = 0.0,
) -> Sensitivity:
    """A table from columns of shape (F,); wrapped phases are unwrapped, one uncertainty may serve all lines.

    Raises:
        MeasurementError: columns that differ in length, descend, or hold impossible values.
    """
    f = np.asarray(frequency_hz, float)
    phase = None if phase_rad is None else np.unwrap(np.asarray(phase_rad, float))
    each = [
        np.array(np.broadcast_to(u, f.shape)) if np.ndim(u) == 0 else np.asarray(u) for u in (relative_u, phase_u_rad)
    ]
    return Sensitivity(f, np.asarray(magnitude_v_per_pa, float), phase, each[0], each[1], common)


def volts_per_pascal(level_db: Floats) -> Floats:
    """From dB re 1 V/µPa to V/Pa, any shape: 10^(L/20) V/µPa, 10^6 µPa to the pascal."""
    return np.asarray(10 ** (np.asarray(level_db, float) / 20) / PA_PER_MICROPASCAL)


def relative_from_db(u_db: Floats) -> Floats:
    """Relative standard uncertainty from one in dB, to first order: u ln(10)/20."""
    return np.asarray(np.asarray(u_db, float) * np.log(10) / 20)


def at(table: Sensitivity, frequencies_hz: Floats) -> Response:
    """Interpolated linearly in frequency: logarithm of the magnitude, and unwrapped phase. `frequencies_hz`: (K,)."""
    f, want = table.frequency_hz, np.asarray(frequencies_hz, float)
    held = np.clip(want, f[0], f[-1])
    upper = np.clip(np.searchsorted(f, held), min(1, f.size - 1), f.size - 1)
    lower = np.maximum(upper - 1, 0)
    gap = np.where(upper > lower, f[upper] - f[lower], 1.0)
    share = np.where(upper > lower, (held - f[lower]) / gap, 0.0)
    weights = np.zeros((want.size, f.size))
    rows = np.arange(want.size)
    weights[rows, lower] += 1 - share
    weights[rows, upper] += share
    magnitude = np.exp(weights @ np.log(table.magnitude_v_per_pa))
    phase = np.zeros(want.size) if table.phase_rad is None else weights @ table.phase_rad
    return Response(magnitude * np.exp(1j * phase), held == want, weights, table.phase_rad is not None)


@dataclass(frozen=True)
class Loading:
    """What the element drives: its own capacitance, then cable and preamplifier in parallel, then a gain."""

    element_f: float
    cable_f: float = 0.0
    input_f: float = 0.0
    input_ohm: float = float("inf")
    gain: float = 1.0


def loaded(table: Sensitivity, loading: Loading) -> Sensitivity:
    """End-of-cable sensitivity from the open-circuit one.

    The element is its capacitance in series with the open-circuit voltage, so the factor is the voltage divider
    Z_L/(Z_L + Z_e) = i w C_e / (1/R + i w (C_e + C_cable + C_in)) (derived; the loading correction of IEC 62127-1 for
    a capacitive element). Uncertainties of the components are not included.

    Raises:
        MeasurementError: impossible values, or a line at 0 Hz with a finite resistance (nothing is passed there).
    """
    x = loading
    if not (x.element_f > 0 and x.cable_f >= 0 and x.input_f >= 0 and x.input_ohm > 0 and x.gain > 0):
        raise MeasurementError("loading: element, resistance and gain must be above 0, other capacitances at least 0")
    total = x.element_f + x.cable_f + x.input_f
    if np.isinf(x.input_ohm):
        factor = np.full(table.frequency_hz.shape, complex(x.gain * x.element_f / total))
    else:
        if table.frequency_hz[0] == 0:
            raise MeasurementError("loading: a resistance passes nothing at 0 Hz; begin the table above 0 Hz")
        w = 2 * np.pi * table.frequency_hz
        factor = x.gain * 1j * w * x.element_f / (1 / x.input_ohm + 1j * w * total)
    phase = None if table.phase_rad is None else table.phase_rad + np.angle(factor)
    return replace(table, magnitude_v_per_pa=table.magnitude_v_per_pa * np.abs(factor), phase_rad=phase)
