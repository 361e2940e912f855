"""Offset and noise of a record, from its quiet part before the burst.

Noise is seldom white: a preamplifier, a bandwidth limit or a neighbour's switching supply shape it. So its density is
estimated near each line, from a periodogram with a Hann window smoothed over neighbouring bins (P. D. Welch, IEEE
Trans. Audio Electroacoust. 15, 70 (1967)); where the quiet part is too short for that, as if it were white. It is
never taken to be less than the steps of the digitiser make it, 1/sqrt(12) of a step: a quiet part within one step
reads zero and means nothing. A step is more than a count where the instrument pads its samples with low bits.
"""

from __future__ import annotations

from dataclasses import dataclass
from typing import Any

import numpy as np
from numpy.typing import NDArray

Vector = NDArray[np.float64]
STEP_VARIANCE = 1 / 12
GLANCE = 32  # of so many samples one tells most records that their step is a count
LONGEST = 1024  # samples; the last ones before the burst
SHORTEST = 256
REACH_BINS = 16  # to either side: some 20 degrees of freedom, 11 % of the standard deviation
REACH_SHARE = 0.25  # of the line's frequency


@dataclass(frozen=True)
class Noise:
    """Of n rows, in counts.

    Attributes:
        level, rms: mean, and rms about it, shape (n,).
        sigma: shape (n, K), standard deviation of the real, and of the imaginary, part of each component.
    """

    level: Vector
    rms: Vector
    sigma: Vector


class Quiet:
    """Works on blocks of fixed shape, so that no row's numbers depend on the others'.

    `samples` is the length of the quiet part, `gate` that of the part whose components are meant.
    """

    def __init__(self, samples: int, gate: int, interval_s: float, frequencies_hz: Vector) -> None:
        self._gain = 2 / gate  # variance of a component's part over that of a sample
        used = min(samples, LONGEST)
        self._tail = slice(samples - used, samples)
        self._smooth: NDArray[np.float32] | None = None
        self._lines = frequencies_hz.size
        if used >= SHORTEST:
            window = np.sin(np.pi * np.arange(used) / used) ** 2
            self._window = (window / np.sqrt(np.sum(window**2))).astype(np.float32)
            self._smooth = _smoothing(used, interval_s, frequencies_hz).astype(np.float32)

    def look(self, block: NDArray[np.float32], step: Vector | float = 1.0) -> Noise:
        """Of a block of rows, shape (n, samples), with the digitiser's step of each, in counts.

        The block is left without its mean.
        """
        level = block.mean(axis=1, dtype=np.float64)
        block -= level[:, None].astype(np.float32)
        variance = np.einsum("ij,ij->i", block, block).astype(np.float64) / block.shape[1]
        if self._smooth is None:
            density = np.repeat(variance[:, None], self._lines, axis=1)
        else:
            spectrum = np.fft.rfft(block[:, self._tail] * self._window, axis=1)
            density = ((spectrum.real**2 + spectrum.imag**2) @ self._smooth).astype(np.float64)
        least = STEP_VARIANCE * np.square(np.asarray(step))[..., None]
        return Noise(level, np.sqrt(variance), np.sqrt(np.maximum(density, least) * self._gain))


def steps_of(counts: NDArray[Any]) -> Vector:
    """The digitiser's step in each record, in counts, shape (n,); `counts` of shape (n, samples), whole numbers.

    Samples of fewer bits are padded with low bits that never change, so the step is the lowest bit that differs
    between any two samples of the record. A record of one value does not tell: 1.
    """
    different = np.bitwise_or.reduce(counts[:, ::GLANCE] ^ counts[:, :1], axis=1)
    if not np.all(different & 1):  # else more samples would change nothing
        different = np.bitwise_or.reduce(counts ^ counts[:, :1], axis=1)
    whole = different.astype(np.int64)
    return np.asarray(np.maximum(whole & -whole, 1), np.float64)


def _smoothing(samples: int, interval_s: float, frequencies_hz: Vector) -> Vector:
    """Weights of the bins for each line, shape (bins, K); the mean was taken off, so the lowest two do not count."""
    bins = np.arange(samples // 2 + 1)
    at = frequencies_hz * samples * interval_s
    reach = np.maximum(REACH_BINS, REACH_SHARE * at)
    taken = (np.abs(bins[:, None] - at) <= reach) & (bins[:, None] >= 2) & (bins[:, None] < samples // 2)
    return np.asarray(taken / taken.sum(axis=0))
