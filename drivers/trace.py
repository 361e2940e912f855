"""One waveform as the oscilloscope gave it: raw counts and the numbers that turn them into volts and seconds."""

from __future__ import annotations

from dataclasses import dataclass

import numpy as np
from numpy.typing import NDArray

Counts = NDArray[np.int8] | NDArray[np.int16]


@dataclass(frozen=True)
class Scaling:
    """volts = counts * volts_per_count + volts_at_zero; sample i was taken at start_s + i * interval_s."""

    volts_per_count: float
    volts_at_zero: float
    interval_s: float
    start_s: float


@dataclass(frozen=True)
class Trace:
    """Raw counts, native byte order, never silently float.

    Attributes:
        counts: shape (n,), int8 or int16, signed whatever the wire carried.
        lowest, highest: the counts at the rails of the digitiser: a sample there is clipped.
        averages: how many triggers were really averaged, as the instrument says.
        full_scale_v: the vertical range that was set.
    """

    counts: Counts
    scaling: Scaling
    lowest: int
    highest: int
    averages: int
    full_scale_v: float

    def volts(self) -> NDArray[np.float64]:
        """Shape (n,), volts."""
        return self.counts.astype(np.float64) * self.scaling.volts_per_count + self.scaling.volts_at_zero
