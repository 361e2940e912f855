"""Quantities of one pressure pulse, each with a standard uncertainty."""

from __future__ import annotations

from dataclasses import astuple, dataclass

import numpy as np
from numpy.typing import NDArray

from checks.errors import MeasurementError

Floats = NDArray[np.float64]
FINER = 8  # the spectrum's lines are that much denser than the record's own
HALF_POWER = 10 ** (-3 / 20)


@dataclass(frozen=True)
class Medium:
    """What the pulse travels in: density kg/m³, speed m/s; and how it is repeated and attenuated.

    Attributes:
        repetition_hz: pulses a second.
        depth_m, derating_db_per_m_hz: depth and attenuation for the derated values; 0.3 dB/(cm MHz) is 3e-5 dB/(m Hz).
    """

    density_kg_m3: float
    speed_m_s: float
    repetition_hz: float
    depth_m: float = 0.0
    derating_db_per_m_hz: float = 3e-5


@dataclass(frozen=True)
class Pulse:
    """Names and units of IEC 62127-1 and IEC 62359 (wording from memory).

    Attributes:
        positive_peak_pa, negative_peak_pa: both positive numbers.
        square_integral_pa2s: pulse-pressure-squared integral.
        duration_s: 1.25 times the time in which the running integral goes from 10 % to 90 %.
        working_hz: mean of the two -3 dB frequencies of the spectrum about its maximum.
        crossing_hz: n/2 over the time of n half-cycles, between the 10 % and 90 % times; nan with fewer than 2 zeros.
        pulse_intensity_integral_j_m2: square integral over density times speed.
        pulse_average_w_m2, temporal_average_w_m2: intensities, spatial-peak where the record is from the beam's peak.
        derated_negative_peak_pa, derated_pulse_average_w_m2, derated_temporal_average_w_m2: attenuated over the depth.
        mechanical_index: derated negative peak in MPa over the root of the working frequency in MHz.
    """

    positive_peak_pa: float
    negative_peak_pa: float
    square_integral_pa2s: float
    duration_s: float
    working_hz: float
    crossing_hz: float
    pulse_intensity_integral_j_m2: float
    pulse_average_w_m2: float
    temporal_average_w_m2: float
    derated_negative_peak_pa: float
    derated_pulse_average_w_m2: float
    derated_temporal_average_w_m2: float
    mechanical_index: float


def pulse_of(pressure_pa: Floats, interval_s: float, medium: Medium) -> Pulse:
    """Quantities of the gated record, shape (n,), Pa.

    Raises:
        MeasurementError: no finite record with a pulse in it, or a medium that cannot be.
    """
    p, m = pressure_pa, medium
    if p.ndim != 1 or p.size < 8 or not np.isfinite(p).all() or not p.any():
        raise MeasurementError("pulse: the gate must hold at least 8 finite samples, not all zero")
    if not (interval_s > 0 and m.density_kg_m3 > 0 and m.speed_m_s > 0 and m.repetition_hz > 0 and m.depth_m >= 0):
        raise MeasurementError("pulse: interval, density, speed and repetition must be above 0, depth at least 0")
    running = np.concatenate([[0.0], np.cumsum((p[1:] ** 2 + p[:-1] ** 2) / 2)]) * interval_s
    whole = float(running[-1])
    early, late = (_reached(running, share * whole) * interval_s for share in (0.1, 0.9))
    duration = 1.25 * (late - early)
    working = working_frequency(p, interval_s)
    pii = whole / (m.density_kg_m3 * m.speed_m_s)
    down = _top(-p)
    loss_db = m.derating_db_per_m_hz * working * m.depth_m
    weaker = down * 10 ** (-loss_db / 20)
    return Pulse(
        positive_peak_pa=_top(p),
        negative_peak_pa=down,
        square_integral_pa2s=whole,
        duration_s=duration,
        working_hz=working,
        crossing_hz=crossing_frequency(p, interval_s, early, late),
        pulse_intensity_integral_j_m2=pii,
        pulse_average_w_m2=pii / duration,
        temporal_average_w_m2=pii * m.repetition_hz,
        derated_negative_peak_pa=weaker,
        derated_pulse_average_w_m2=pii / duration * 10 ** (-loss_db / 10),
        derated_temporal_average_w_m2=pii * m.repetition_hz * 10 ** (-loss_db / 10),
        mechanical_index=mechanical_index(weaker, working),
    )


def pulse_uncertainty(draws_pa: Floats, interval_s: float, medium: Medium) -> Pulse:
    """Standard uncertainty of each quantity: standard deviation over drawn records, shape (draws, n) (JCGM 101).

    Density, speed and depth are taken as exact; what is not known of them is to be added.

    Raises:
        MeasurementError: fewer than 50 draws, which would leave the uncertainty itself more than 10 % uncertain.
    """
    if draws_pa.ndim != 2 or draws_pa.shape[0] < 50:
        raise MeasurementError("pulse: give at least 50 drawn records for an uncertainty")
    rows = np.array([astuple(pulse_of(row, interval_s, medium)) for row in draws_pa])
    return Pulse(*(float(u) for u in rows.std(axis=0, ddof=1)))


def mechanical_index(negative_peak_pa: float, working_hz: float) -> float:
    """Peak in MPa over the root of the frequency in MHz (IEC 62359, from memory)."""
    return negative_peak_pa * 1e-6 / float(np.sqrt(working_hz * 1e-6))


def working_frequency(pressure_pa: Floats, interval_s: float) -> float:
    """Mean of the frequencies at which the amplitude spectrum is 3 dB below its maximum, Hz; a side may end at 0 Hz."""
    size = 2 ** int(np.ceil(np.log2(pressure_pa.size * FINER)))
    spectrum = np.abs(np.fft.rfft(pressure_pa, size))
    top = int(spectrum.argmax())
    level = HALF_POWER * _top(spectrum)
    below = np.flatnonzero(spectrum < level)
    left, right = below[below < top], below[below > top]
    low = 0.0 if left.size == 0 else _crossed(spectrum, int(left[-1]), level)
    high = spectrum.size - 1.0 if right.size == 0 else _crossed(spectrum, int(right[0]) - 1, level)
    return float((low + high) / 2 / (size * interval_s))


def crossing_frequency(pressure_pa: Floats, interval_s: float, early_s: float, late_s: float) -> float:
    """From the zero crossings between two times (s from the first sample), Hz; nan where fewer than two."""
    where = np.flatnonzero((pressure_pa[1:] > 0) != (pressure_pa[:-1] > 0))
    times = np.array([_crossed(pressure_pa, int(i), 0.0) for i in where]) * interval_s
    times = times[(times >= early_s) & (times <= late_s)]
    return float((times.size - 1) / (2 * (times[-1] - times[0]))) if times.size > 1 else float("nan")


def _crossed(y: Floats, i: int, level: float) -> float:
    """Fractional index at which the straight line from y[i] to y[i + 1] has the level."""
    return i + float((level - y[i]) / (y[i + 1] - y[i]))


def _reached(running: Floats, level: float) -> float:
    """Fractional index at which a rising row first reaches a level above its start."""
    return _crossed(running, int(np.searchsorted(running, level)) - 1, level)


def _top(y: Floats) -> float:
    """Largest value, by a parabola through the largest sample and its neighbours where it has two."""
    i = int(y.argmax())
    if i in (0, y.size - 1):
        return float(y[i])
    a, b, c = float(y[i - 1]), float(y[i]), float(y[i + 1])
    bend = a - 2 * b + c
    return b if bend == 0 else b - (a - c) ** 2 / (8 * bend)
