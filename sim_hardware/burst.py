"""What the source puts into the water for one burst: a tone with harmonics, as a spectrum in absolute time."""

from __future__ import annotations

from dataclasses import dataclass

import numpy as np
from numpy.typing import NDArray

from sim_hardware import water
from sim_hardware.capture import DriveState
from sim_hardware.field import SourceShape
from sim_hardware.harmonics import harmonic_amplitudes
from sim_hardware.truth import SourceTruth

Real = NDArray[np.float64]


@dataclass(frozen=True)
class Burst:
    """A burst as the drive asks for it, with its first sample at time zero.

    Attributes:
        frequency_hz: of the fundamental.
        weights: shape (harmonics,), complex, Pa: the burst is envelope times Re sum weights_n exp(j n omega t).
        steady_s: time for which the drive is on.
        rise_s: time of its rise, and of its fall after the drive has ended.
    """

    frequency_hz: float
    weights: NDArray[np.complex128]
    steady_s: float
    rise_s: float

    @property
    def length_s(self) -> float:
        """From the first to the last movement of the face."""
        return self.steady_s + self.rise_s

    def envelope(self, t: Real) -> Real:
        """Zero to one and back with raised-cosine flanks, zero before time zero."""
        return _flank(t, self.rise_s) - _flank(t - self.steady_s, self.rise_s)

    def samples(self, t: Real) -> Real:
        """The burst at times `t` in s."""
        base = np.exp(2j * np.pi * self.frequency_hz * t)
        total = np.zeros_like(base)
        for weight in self.weights[::-1]:
            total = (total + weight) * base
        wave: Real = self.envelope(t) * total.real
        return wave


def make_burst(truth: SourceTruth, drive: DriveState, temperature_c: float) -> Burst:
    """The burst of a drive: strength and steepness grow with its amplitude.

    At the reference point, absorption apart, the wave is p0 sum B_n cos(n omega tau + psi), tau from its arrival.
    """
    pressure = truth.reference_pressure_kpa * 1e3 * drive.amplitude_v / truth.reference_drive_v
    amplitudes = harmonic_amplitudes(shock_parameter(truth, drive, temperature_c), truth.harmonics)
    return Burst(
        frequency_hz=drive.frequency_hz,
        weights=pressure * amplitudes * np.exp(1j * np.radians(truth.harmonic_phase_deg)),
        steady_s=drive.cycles / drive.frequency_hz,
        rise_s=truth.rise_cycles / drive.frequency_hz,
    )


def source_shape(truth: SourceTruth) -> SourceShape:
    """The source as the field needs it, in metres."""
    return SourceShape(
        radius_m=truth.radius_mm * 1e-3,
        focal_m=None if truth.focal_length_mm is None else truth.focal_length_mm * 1e-3,
        beam_exponent=truth.beam_exponent,
        reference_m=truth.reference_distance_mm * 1e-3,
    )


def shock_parameter(truth: SourceTruth, drive: DriveState, temperature_c: float) -> float:
    """Shock parameter at the reference point for that drive, without unit."""
    share = drive.amplitude_v / truth.reference_drive_v
    if truth.shock_parameter is not None:
        return truth.shock_parameter * share
    pressure = truth.reference_pressure_kpa * 1e3 * share
    if pressure == 0:
        return 0.0
    return truth.reference_distance_mm * 1e-3 / water.shock_distance(pressure, drive.frequency_hz, temperature_c)


def null_factor(truth: SourceTruth, frequencies: Real) -> Real:
    """What the dips of the source leave of each frequency."""
    factor = np.ones_like(frequencies)
    for null in truth.nulls:
        away = (frequencies * 1e-6 - null.frequency_mhz) / null.width_mhz
        factor *= 1 - (1 - 10 ** (-null.depth_db / 20)) * np.exp(-(away**2) / 2)
    return factor


def _flank(t: Real, rise_s: float) -> Real:
    if rise_s == 0:
        return (t >= 0).astype(np.float64)
    flank: Real = (1 - np.cos(np.pi * np.clip(t / rise_s, 0, 1))) / 2
    return flank
