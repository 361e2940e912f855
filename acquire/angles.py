"""Which angles a rotation scan visits: a span with a step, a list, or steps from the highest wanted frequency."""

from __future__ import annotations

from math import asin, ceil, pi, radians, sin

import numpy as np
from numpy.typing import NDArray

from profiles.scan import Rotation
from profiles.units import DEG, MHZ

ONE_DB_UP_TO_HZ = 20e6
LOWEST_LEVEL_DB = -10.0  # neighbours need not be within 1 dB below this level
FLOOR_DEG = 0.05


def angles(rotation: Rotation, radius_m: float, speed_m_s: float) -> NDArray[np.float64]:
    """Angles in radians, ascending, zero among them when they come from a span.

    `radius_m` is the nominal radius of the element and `speed_m_s` the speed of sound; both matter only where
    the step is chosen from a frequency.
    """
    if rotation.angles_deg is not None:
        return np.sort(np.radians(np.array(rotation.angles_deg)))
    half = (rotation.span_deg or 0.0) * DEG / 2
    if rotation.step_deg is not None:
        step = rotation.step_deg * DEG
    else:
        step = step_for((rotation.highest_mhz or 0.0) * MHZ, radius_m, speed_m_s, half)
    steps = int(half / step + 1e-9)
    return np.arange(-steps, steps + 1, dtype=np.float64) * step


def step_for(frequency_hz: float, radius_m: float, speed_m_s: float, half_span: float) -> float:
    """Largest constant step in radians that resolves the pattern of a disc at `frequency_hz`.

    Two rules, the stricter counts. The pattern is the Fourier transform, in u = sin(theta), of an aperture 2a
    wide, so |D|^2 is sampled without loss at steps of lambda/(4a) in u (sampling theorem). And up to 20 MHz
    neighbours differ by at most 1 dB (draft amendment prA1:2025 to EN IEC 62127-3, seen in a preview), here
    required down to -10 dB, below which every pattern is steep.
    """
    wavelength = speed_m_s / frequency_hz
    by_sampling = wavelength / (4 * radius_m)
    step = asin(min(1.0, by_sampling))
    step = min(step, one_db_step(min(frequency_hz, ONE_DB_UP_TO_HZ), radius_m, speed_m_s, half_span))
    whole = ceil(half_span / step)
    return max(half_span / whole, radians(FLOOR_DEG))


def one_db_step(frequency_hz: float, radius_m: float, speed_m_s: float, half_span: float) -> float:
    """Step in radians at which a rigid disc's level changes by 1 dB where it is steepest above -10 dB."""
    from scipy.special import j1, jv

    theta = np.linspace(1e-4, half_span, 2000)
    k_a = 2 * pi * frequency_hz * radius_m / speed_m_s
    x = k_a * np.sin(theta)
    level = 20 * np.log10(np.abs(2 * j1(x) / x) + 1e-12)
    above = np.cumprod(level > LOWEST_LEVEL_DB).astype(bool)
    slope = np.abs(jv(2, x) / j1(x)) * k_a * np.cos(theta) * 20 / np.log(10)
    steepest = float(slope[above].max(initial=1e-9))
    return min(half_span, 1.0 / steepest)


def resolved_hz(step: float, radius_m: float, speed_m_s: float) -> float:
    """Highest frequency whose |D|^2 a step in radians samples without loss."""
    return speed_m_s / (4 * radius_m * sin(min(step, pi / 2)))
