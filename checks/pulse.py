"""Quantities of a pulse, from a waveform of pressure (or of voltage, where only ratios matter)."""

from __future__ import annotations

import numpy as np
from numpy.typing import NDArray

Vector = NDArray[np.float64]


def peaks(waveform: Vector) -> tuple[float, float]:
    """Positive and negative peak, the latter as a magnitude (IEC 62127-1: peak-compressional, peak-rarefactional)."""
    return float(waveform.max()), float(-waveform.min())


def square_integral(waveform: Vector, interval_s: float) -> float:
    """Pulse-pressure-squared integral: the square of the waveform, shape (n,), summed over time; Pa² s or V² s."""
    return float(np.dot(waveform, waveform)) * interval_s
