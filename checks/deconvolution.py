"""From volts to pascals: division by the sensitivity in the frequency domain, with an uncertainty for every sample.

x = irfft(L Y / H): Y the record's DFT, H the sensitivity, L a stated low-pass that keeps the division from raising
noise without limit. Two routes to the uncertainty: propagation to first order (JCGM 100, and JCGM 102 for complex
quantities), and Monte Carlo (JCGM 101). What the low-pass takes from the pulse is in neither: it is no random effect.
"""

from __future__ import annotations

from dataclasses import dataclass

import numpy as np
from numpy.typing import NDArray
from scipy.fft import irfft, next_fast_len, rfft

from checks.errors import MeasurementError
from checks.sensitivity import Response, Sensitivity, at

Floats = NDArray[np.float64]
Complexes = NDArray[np.complex128]
# over the mean power of noise in a line, which is exponential: of 10,000 lines of noise one is above by chance in 50
CLEAR = 13.0
BLOCK = 64  # table lines propagated at a time, which bounds the memory


@dataclass(frozen=True)
class LowPass:
    """1/(1 + i f/corner)^order, or its magnitude alone where `zero_phase`: 3.01 dB times the order at the corner."""

    corner_hz: float
    order: int = 2
    zero_phase: bool = False

    def __post_init__(self) -> None:
        if not (0 < self.corner_hz < np.inf and self.order >= 1):
            raise MeasurementError("low-pass: corner must be above 0 Hz and finite, order at least 1")

    def gain(self, frequencies_hz: Floats) -> Complexes:
        """Complex gain, shape as given."""
        gain = (1 + 1j * np.asarray(frequencies_hz) / self.corner_hz) ** -self.order
        return np.asarray(np.abs(gain) if self.zero_phase else gain, np.complex128)


@dataclass(frozen=True)
class Pressure:
    """A record of n samples, deconvolved.

    Attributes:
        pressure_pa, standard_u_pa: shape (n,).
        noise_u_pa, sensitivity_u_pa: shape (n,), the two parts; their squares add.
        outside_share: share (0 to 1) of the pressure's energy at frequencies outside the sensitivity table, where its
            end values were held: such a share is not covered by the uncertainty.
        phase_known: whether the table gave phases; without them the shape of the pulse is not corrected.
        low_pass: what was applied.
    """

    pressure_pa: Floats
    standard_u_pa: Floats
    noise_u_pa: Floats
    sensitivity_u_pa: Floats
    outside_share: float
    phase_known: bool
    low_pass: LowPass


@dataclass(frozen=True)
class _Division:
    response: Response
    inverse: Complexes
    spectrum: Complexes
    length: int


def deconvolve(
    volts: Floats, interval_s: float, noise_v: float, table: Sensitivity, low_pass: LowPass, length: int | None = None
) -> Pressure:
    """Pressure with standard uncertainty by first-order propagation.

    Args:
        volts: shape (n,), offset removed.
        interval_s: of the samples.
        noise_v: standard deviation of the white noise of `volts`.
        table: the sensitivity, of the whole chain.
        low_pass: what regularises the division.
        length: DFT length, at least n; the record is filled with (noiseless) zeros. None: twice n or a little more.

    Raises:
        MeasurementError: a record, interval, noise or length that cannot be.
    """
    d = _divide(volts, interval_s, noise_v, table, low_pass, length)
    n = volts.size
    noise = _noise_variance(d, n, noise_v)
    calibration = _table_variance(d, n, table)
    c = np.full(d.spectrum.size, 2.0)
    c[0] = 1.0
    energy = c * np.abs(d.spectrum) ** 2
    total = float(energy.sum())
    outside = float(energy[~d.response.inside].sum()) / total if total > 0 else 0.0
    return Pressure(
        pressure_pa=irfft(d.spectrum, d.length)[:n],
        standard_u_pa=np.sqrt(noise + calibration),
        noise_u_pa=np.sqrt(noise),
        sensitivity_u_pa=np.sqrt(calibration),
        outside_share=outside,
        phase_known=d.response.phase_known,
        low_pass=low_pass,
    )


def monte_carlo(
    volts: Floats,
    interval_s: float,
    noise_v: float,
    table: Sensitivity,
    low_pass: LowPass,
    draws: int,
    rng: np.random.Generator,
    length: int | None = None,
) -> Floats:
    """Deconvolved records of shape (draws, n), Pa, inputs drawn from normal distributions; see `deconvolve`.

    The division is carried out in full for each draw, so nothing is linearised. A magnitude is drawn as m (1 + u z).
    """
    d = _divide(volts, interval_s, noise_v, table, low_pass, length)
    out = np.empty((draws, volts.size))
    for i in range(draws):
        factor = 1 + table.relative_u * _correlated(rng, table)
        if (factor <= 0).any():
            raise MeasurementError("Monte Carlo: a magnitude of the table is too uncertain to divide by; lower its u")
        shift = d.response.weights @ np.stack([np.log(factor), table.phase_u_rad * _correlated(rng, table)], axis=1)
        noisy = rfft(volts + noise_v * rng.standard_normal(volts.size), d.length)
        out[i] = irfft(noisy * d.inverse * np.exp(-shift[:, 0] - 1j * shift[:, 1]), d.length)[: volts.size]
    return out


def clear_up_to(volts: Floats, interval_s: float, noise_v: float, table: Sensitivity) -> float:
    """Highest frequency, within the table, at which the record stands out of the noise, Hz; to put a low-pass above.

    Raises:
        MeasurementError: there is none.
    """
    f = np.asarray(np.fft.rfftfreq(volts.size, interval_s), np.float64)
    level = np.abs(rfft(volts)) ** 2
    clear = (level > CLEAR * noise_v**2 * volts.size) & (f > 0) & (f <= table.frequency_hz[-1])
    if not clear.any():
        raise MeasurementError("at no frequency of the sensitivity table is the signal clear of the noise")
    return float(f[np.flatnonzero(clear)[-1]])


def divide_by_one(volts: Floats, table: Sensitivity, frequency_hz: float) -> Floats:
    """The plain way, for comparison: volts over |sensitivity| at one frequency, shape (n,), Pa.

    Raises:
        MeasurementError: the frequency lies outside the table.
    """
    response = at(table, np.array([frequency_hz]))
    if not response.inside[0]:
        low, high = table.frequency_hz[[0, -1]]
        raise MeasurementError(f"{frequency_hz:g} Hz is outside the sensitivity table; allowed: {low:g} to {high:g} Hz")
    return volts / float(np.abs(response.value[0]))


def _divide(
    volts: Floats, interval_s: float, noise_v: float, table: Sensitivity, low_pass: LowPass, length: int | None
) -> _Division:
    if volts.ndim != 1 or volts.size < 2 or not np.isfinite(volts).all():
        raise MeasurementError("deconvolution: the record must be one row of at least 2 finite samples")
    if not (0 < interval_s < np.inf and 0 <= noise_v < np.inf):
        raise MeasurementError("deconvolution: the sample interval must be above 0 s, the noise at least 0 V")
    n = next_fast_len(2 * volts.size, real=True) if length is None else length
    if n < volts.size:
        raise MeasurementError(f"deconvolution: DFT length {n} given; allowed: at least {volts.size}")
    f = np.asarray(np.fft.rfftfreq(n, interval_s), np.float64)
    response = at(table, f)
    inverse = low_pass.gain(f) / response.value
    return _Division(response, inverse, rfft(volts, n) * inverse, n)


def _noise_variance(d: _Division, n: int, noise_v: float) -> Floats:
    """White noise in the n samples and none in the filling: sum of the squared kernel over the record, shape (n,)."""
    kernel = irfft(d.inverse, d.length)
    record = np.zeros(d.length)
    record[:n] = 1.0
    spread = irfft(rfft(kernel**2) * rfft(record), d.length)[:n]
    return np.asarray(noise_v**2 * np.maximum(spread, 0.0))


def _table_variance(d: _Division, n: int, table: Sensitivity) -> Floats:
    """What magnitudes and phases contribute: dx = -irfft(X (dm/m + i dphi)), line by line of the table; shape (n,)."""
    total = np.zeros(n)
    for turn, u in ((1.0, table.relative_u), (1j, table.phase_u_rad)):
        together = irfft(turn * d.spectrum * (d.response.weights @ u), d.length)[:n]
        total += table.common * together**2
        for start in range(0, u.size, BLOCK) if table.common < 1 else ():
            part = slice(start, start + BLOCK)
            columns = (d.response.weights[:, part] * u[part]).T * (turn * d.spectrum)
            total += (1 - table.common) * (irfft(columns, d.length, axis=1)[:, :n] ** 2).sum(axis=0)
    return total


def _correlated(rng: np.random.Generator, table: Sensitivity) -> Floats:
    """Standard normal, shape (F,), any two with the correlation `common`."""
    own = rng.standard_normal(table.frequency_hz.size)
    return np.asarray(np.sqrt(table.common) * rng.standard_normal() + np.sqrt(1 - table.common) * own)
