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
from checks.quiet import Quiet, steps_of

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
        self._before = slice(c.gate.quiet_start, c.gate.quiet_stop)
        self._interval_s = c.sample_interval_s
        self._lines = c.frequencies_hz.size
        length = c.gate.stop - c.gate.start
        frequencies = np.concatenate([c.frequencies_hz, c.side_lines_hz])
        times = c.record_start_s + np.arange(c.gate.start, c.gate.stop) * c.sample_interval_s
        angle = 2 * np.pi * np.outer(times, frequencies)
        # real and imaginary parts side by side, so that the product is read as complex numbers
        self._matrix = (np.exp(-1j * angle) * (2 / length)).view(np.float64).astype(np.float32)
        self._leak = self._matrix.sum(axis=0, dtype=np.float64)
        self._block = np.zeros((ROWS, length), np.float32)
        samples = c.gate.quiet_stop - c.gate.quiet_start
        self._quiet = Quiet(samples, length, c.sample_interval_s, c.frequencies_hz)
        self._quiet_block = np.zeros((ROWS, samples), np.float32)

    def reduce(self, counts: Sequence[Counts], metas: Sequence[PointMeta]) -> list[Observation]:
        """Observations of points of one aligned block of eight; `counts` are rows of shape (samples,)."""
        rows = [meta.index % ROWS for meta in metas]
        if len(rows) < ROWS:
            self._block[:] = self._quiet_block[:] = 0.0
        whole = np.array(counts)
        inside = whole[:, self._gate]
        self._block[rows] = inside
        self._quiet_block[rows] = whole[:, self._before]
        parts = (self._block @ self._matrix).astype(np.float64)
        step = np.ones(ROWS)
        step[rows] = steps_of(whole)
        noise = self._quiet.look(self._quiet_block, step)
        parts -= noise.level[:, None] * self._leak
        self._block -= noise.level[:, None].astype(np.float32)
        square = np.einsum("ij,ij->i", self._block, self._block).astype(np.float64)
        gain = np.array([meta.volts_per_count for meta in metas])
        zero = np.array([meta.volts_at_zero for meta in metas])
        level = noise.level[rows]
        ends = np.array([inside.max(axis=1) - level, inside.min(axis=1) - level]) * gain
        numbers = _Rows(
            components=parts.view(np.complex128)[rows] * gain[:, None],
            sigma=noise.sigma[rows] * np.abs(gain)[:, None],
            rms=(noise.rms[rows] * np.abs(gain)).tolist(),
            offset=(level * gain + zero).tolist(),
            peak=ends.max(axis=0).tolist(),
            trough=ends.min(axis=0).tolist(),
            square=(square[rows] * gain**2 * self._interval_s).tolist(),
            high=whole.max(axis=1).tolist(),
            low=whole.min(axis=1).tolist(),
        )
        return [
            self._observe(numbers, i, samples, meta)
            for i, (samples, meta) in enumerate(zip(counts, metas, strict=True))
        ]

    def _observe(self, numbers: _Rows, i: int, samples: Counts, meta: PointMeta) -> Observation:
        low, high = numbers.low[i], numbers.high[i]
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
            components=numbers.components[i, : self._lines],
            side_components=numbers.components[i, self._lines :],
            component_noise_v=numbers.sigma[i],
            peak_v=numbers.peak[i],
            trough_v=numbers.trough[i],
            square_integral_v2s=numbers.square[i],
            noise_rms_v=numbers.rms[i],
            offset_v=numbers.offset[i],
            clipped_high=int(np.count_nonzero(samples >= meta.highest)) if high >= meta.highest else 0,
            clipped_low=int(np.count_nonzero(samples <= meta.lowest)) if low <= meta.lowest else 0,
            range_use=min(1.0, max(high - middle, middle - low) / half_range),
        )


@dataclass(frozen=True)
class _Rows:
    """What was computed for all rows at once, each row from its own samples alone; in volts, the extremes in counts."""

    components: NDArray[np.complex128]
    sigma: NDArray[np.float64]
    rms: list[float]
    offset: list[float]
    peak: list[float]
    trough: list[float]
    square: list[float]
    high: list[int]
    low: list[int]
