"""A small picture of a waveform and its spectrum for a live view; thinned so that peaks survive."""

from __future__ import annotations

from typing import Any

import numpy as np
from numpy.typing import NDArray

from acquire.messages import WaveformSeen
from acquire.record import PointRecord

WANTED = 400
LOWEST_DB = -120.0


def thinned(record: PointRecord, counts: NDArray[Any]) -> WaveformSeen:
    """Lows and highs of some 400 pieces of the record, largest level in some 400 pieces of its spectrum."""
    volts = counts.astype(np.float32) * np.float32(record.volts_per_count) + np.float32(record.volts_at_zero)
    step = max(1, volts.size // WANTED)
    pieces = volts[: volts.size // step * step].reshape(-1, step)
    spectrum = np.abs(np.fft.rfft((volts - volts.mean()) * np.hanning(volts.size)))
    width = max(1, spectrum.size // WANTED)
    largest = spectrum[: spectrum.size // width * width].reshape(-1, width).max(axis=1)
    floor = largest.max() * 10 ** (LOWEST_DB / 20) + 1e-30
    return WaveformSeen(
        index=record.index,
        start_s=record.start_s,
        interval_s=record.interval_s * step,
        low_v=pieces.min(axis=1).tolist(),
        high_v=pieces.max(axis=1).tolist(),
        spectrum_step_hz=width / (volts.size * record.interval_s),
        spectrum_db=(20 * np.log10(np.maximum(largest, floor) / max(largest.max(), 1e-30))).tolist(),
    )
