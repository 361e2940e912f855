"""From raw counts to one observation a point.

The Fourier components at all wanted lines are one matrix product of fixed shape: eight rows, point i always in row
i mod 8, rows that are not there zero. So a point's numbers do not depend on how points were batched, and a stored
scan that is checked again gives the same findings to the letter.
"""

from __future__ import annotations

from collections.abc import Sequence
from dataclasses import dataclass

import numpy as np
from numpy.typing import NDArray

from checks.observation import Circumstances, Observation, Pose

ROWS = 8
Counts = NDArray[np.int8] | NDArray[np.int16]


@dataclass(frozen=True)
class PointMeta:
    """What is known of a point beside its counts; see `Observation` and `drivers.trace.Scaling`."""

    index: int
    reference: bool
    plane: int
    commanded: Pose
    reported_before: Pose
    reported_after: Pose
    time_s: float
    temperature_c: float
    volts_per_count: float
    volts_at_zero: float
    lowest: int
    highest: int


class Reducer:
    """Keeps the matrix; one for each scan."""

    def __init__(self, circumstances: Circumstances) -> None:
        c = circumstances
        self._gate = slice(c.gate.start, c.gate.stop)
        self._quiet = slice(c.gate.quiet_start, c.gate.quiet_stop)
        self._interval_s = c.sample_interval_s
        self._lines = c.frequencies_hz.size
        length = c.gate.stop - c.gate.start
        frequencies = np.concatenate([c.frequencies_hz, c.side_lines_hz])
        times = c.record_start_s + np.arange(c.gate.start, c.gate.stop) * c.sample_interval_s
        angle = 2 * np.pi * np.outer(times, frequencies)
        self._matrix = (np.hstack([np.cos(angle), -np.sin(angle)]) * (2 / length)).astype(np.float32)
        self._leak = self._matrix.sum(axis=0, dtype=np.float64)
        self._noise_gain = float(np.sqrt(2 / length))
        self._block = np.zeros((ROWS, length), np.float32)

    def reduce(self, counts: Sequence[Counts], metas: Sequence[PointMeta]) -> list[Observation]:
        """Observations of points of one aligned block of eight; `counts` are rows of shape (samples,)."""
        rows = [meta.index % ROWS for meta in metas]
        if len(rows) < ROWS:
            self._block[:] = 0.0
        whole = np.array(counts)
        inside = whole[:, self._gate]
        self._block[rows] = inside
        product = (self._block @ self._matrix)[rows].astype(np.float64)
        quiet = whole[:, self._quiet].astype(np.float32)
        level = quiet.mean(axis=1, dtype=np.float64)
        quiet -= level[:, None].astype(np.float32)
        noise = np.sqrt(np.einsum("ij,ij->i", quiet, quiet).astype(np.float64) / quiet.shape[1])
        gated = self._block[rows]
        gated -= level[:, None].astype(np.float32)
        numbers = _Rows(
            parts=product - level[:, None] * self._leak,
            level=level,
            noise=noise,
            top=inside.max(axis=1) - level,
            bottom=inside.min(axis=1) - level,
            square=np.einsum("ij,ij->i", gated, gated).astype(np.float64),
            high=whole.max(axis=1),
            low=whole.min(axis=1),
        )
        return [
            self._observe(numbers, i, samples, meta)
            for i, (samples, meta) in enumerate(zip(counts, metas, strict=True))
        ]

    def _observe(self, numbers: _Rows, i: int, samples: Counts, meta: PointMeta) -> Observation:
        gain = meta.volts_per_count
        noise = float(numbers.noise[i]) * abs(gain)
        level = float(numbers.level[i])
        parts = numbers.parts[i] * gain
        half = parts.size // 2
        components = parts[:half] + 1j * parts[half:]
        low, high = int(numbers.low[i]), int(numbers.high[i])
        ends = (float(numbers.top[i]) * gain, float(numbers.bottom[i]) * gain)
        middle, half_range = (meta.highest + meta.lowest) / 2, (meta.highest - meta.lowest) / 2
        return Observation(
            index=meta.index,
            reference=meta.reference,
            plane=meta.plane,
            commanded=meta.commanded,
            reported_before=meta.reported_before,
            reported_after=meta.reported_after,
            time_s=meta.time_s,
            temperature_c=meta.temperature_c,
            components=components[: self._lines],
            side_components=components[self._lines :],
            component_noise_v=np.full(self._lines, noise * self._noise_gain),
            peak_v=max(ends),
            trough_v=min(ends),
            square_integral_v2s=float(numbers.square[i]) * gain**2 * self._interval_s,
            noise_rms_v=noise,
            offset_v=level * gain + meta.volts_at_zero,
            clipped_high=int(np.count_nonzero(samples >= meta.highest)) if high >= meta.highest else 0,
            clipped_low=int(np.count_nonzero(samples <= meta.lowest)) if low <= meta.lowest else 0,
            range_use=min(1.0, max(high - middle, middle - low) / half_range),
        )


@dataclass(frozen=True)
class _Rows:
    """What was computed for all rows at once, each row from its own samples alone; in counts."""

    parts: NDArray[np.float64]
    level: NDArray[np.float64]
    noise: NDArray[np.float64]
    top: NDArray[np.float64]
    bottom: NDArray[np.float64]
    square: NDArray[np.float64]
    high: NDArray[np.int8] | NDArray[np.int16]
    low: NDArray[np.int8] | NDArray[np.int16]
