"""From a spectrum on a coarse grid to a sampled record.

With the delay of the element's centre left out, the spectrum of what the face feels is smooth: it is worked out on
a coarse grid of frequencies, interpolated to those of the record, multiplied by the burst and turned into samples.
"""

from __future__ import annotations

import math

import numpy as np
from numpy.typing import NDArray
from scipy.fft import irfft, next_fast_len, rfft
from scipy.sparse import csr_array

from sim_hardware.burst import Burst
from sim_hardware.capture import CaptureRequest
from sim_hardware.interpolation import stencil

Real = NDArray[np.float64]
Complex = NDArray[np.complex64]

SPREAD_S = 2.5e-6  # longest reach of the source's edge waves, the element's tilt and the preamplifier's memory
_COARSEST_HZ = 0.25e6
_NEIGHBOURS = 8
_OVERSAMPLING = 12
_COLUMNS = 64


def coarse_grid(drive_hz: float, highest_hz: float, reach_s: float) -> Real:
    """Equally spaced frequencies from zero to a little above `highest_hz`; the drive's is one of them.

    Args:
        drive_hz: frequency of the drive.
        highest_hz: end of the band.
        reach_s: how far from the centre's arrival the edge of the element feels a wave; long reaches need more.
    """
    step = min(_COARSEST_HZ, 0.15 / reach_s) if reach_s > 0 else _COARSEST_HZ
    parts = max(math.ceil(drive_hz / step), 2)
    count = math.ceil(highest_hz / drive_hz * parts) + 2
    grid: Real = np.arange(max(count, _NEIGHBOURS), dtype=np.float64) * (drive_hz / parts)
    return grid


class Record:
    """Everything about one way of recording one burst that does not change from capture to capture."""

    def __init__(self, request: CaptureRequest, burst: Burst, coarse: Real, highest_hz: float) -> None:
        """Plan a period long enough that a burst cut by either end of the record does not come round again."""
        rate = request.sample_rate_hz
        self._rate, self._start, self._points = rate, request.start_s, request.points
        self._length_s = burst.length_s + 2 * SPREAD_S
        wanted = request.points + math.ceil(self._length_s * rate) + 1
        self._period = int(next_fast_len(wanted, real=True))
        self._bin_hz = rate / self._period
        bins = min(math.ceil(highest_hz / self._bin_hz), self._period // 2)
        self.frequencies: Real = np.arange(bins, dtype=np.float64) * self._bin_hz
        lines, weights = stencil(self.frequencies / coarse[1], _NEIGHBOURS, lowest=0, highest=coarse.size - 1)
        rows = np.repeat(np.arange(bins), _NEIGHBOURS)
        self._to_bins = csr_array(
            (weights.astype(np.float32).ravel(), (rows, lines.ravel())), shape=(bins, coarse.size)
        )
        self.burst: Complex = self._spectrum(burst)

    def holds(self, delay_s: float) -> bool:
        """Whether any of a burst that arrives with that delay falls into the record."""
        first = delay_s - SPREAD_S
        return first < self._start + self._points / self._rate and first + self._length_s > self._start

    def spectrum(self, coarse: Complex, delay_s: float) -> Complex:
        """The burst, filtered by a spectrum on the coarse grid and delayed, at the record's frequencies."""
        pairs = coarse.view(np.float32).reshape(-1, 2)
        fine = np.ascontiguousarray(self._to_bins @ pairs).view(np.complex64)[:, 0]
        delayed: Complex = fine * self.shift(delay_s - self._start)
        return delayed

    def shift(self, delay_s: float) -> Complex:
        """Phase factors exp(-j omega delay) at the record's frequencies, in double precision until the end."""
        turn = -2j * np.pi * self._bin_hz * delay_s
        count = self.frequencies.size
        within = np.exp(turn * np.arange(_COLUMNS))
        blocks = np.exp(turn * _COLUMNS * np.arange(-(-count // _COLUMNS)))
        factors: Complex = (blocks[:, None] * within).astype(np.complex64).ravel()[:count]
        return factors

    def samples(self, spectrum: Complex) -> NDArray[np.float32]:
        """Shape (points,) from a spectrum at the record's frequencies."""
        full = np.zeros(self._period // 2 + 1, np.complex64)
        full[: spectrum.size] = spectrum
        wave: NDArray[np.float32] = irfft(full, self._period)[: self._points]
        return wave

    def _spectrum(self, burst: Burst) -> Complex:
        """The burst's spectrum, sampled finely enough that what lies above the record's band does not fold."""
        highest = burst.frequency_hz * burst.weights.size
        fine = max(1, math.ceil(_OVERSAMPLING * highest / self._rate))
        t = np.arange(self._period * fine) / (self._rate * fine)
        whole = rfft(burst.samples(t))[: self.frequencies.size] / fine
        spectrum: Complex = whole.astype(np.complex64)
        return spectrum
