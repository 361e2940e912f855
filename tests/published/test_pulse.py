"""Peaks and pulse-pressure-squared integral of bursts with closed forms, through counts and reduction."""

from dataclasses import replace

import numpy as np
import pytest
from numpy.typing import NDArray

from checks.observation import Gate, Observation, Pose
from checks.reduce import PointMeta, Reducer
from tests.checks.synthetic import circumstances

# The integral of the squared pressure is what IEC 62127-1 calls the pulse-pressure-squared integral; the closed forms
# are derived: for p0 exp(-t²/2s²) cos(wt + phi) it is p0² s sqrt(pi)/2 (1 + cos(2 phi) exp(-(w s)²)).
INTERVAL = 1e-9
SAMPLES = 8000
HERE = Pose(0, 0, 0.12)


def reduced(volts: NDArray[np.float64]) -> Observation:
    """A 16-bit record of the burst, its full scale twice the largest voltage."""
    c = replace(circumstances(), sample_interval_s=INTERVAL, gate=Gate(1500, 7900, 100, 1400))
    step = 2 * np.abs(volts).max() / 32767
    meta = PointMeta(0, True, 0, HERE, HERE, HERE, 0.0, 20.0, step, 0.0, -32768, 32767)
    return Reducer(c).reduce([np.rint(volts / step).astype(np.int16)], [meta])[0]


# amplitude, frequency, s, phase -> integral, positive and negative peak (by quadrature with another program); here the
# amplitude of the table, in Pa, is taken for volts
GAUSSIAN = [
    (1e6, 3e6, 3e-7, 0.0, 265868.0, 1e6, 861010.8),
    (1e6, 5e6, 2e-7, 0.0, 177245.0, 1e6, 885223.7),
    (2e6, 1e7, 1e-7, 0.0, 354491.0, 2e6, 1770447.0),
    (1e6, 5e6, 5e-8, 0.0, 48069.2, 1e6, 229661.9),
    (1e6, 5e6, 5e-8, np.pi / 2, 40553.5, 698258.7, 698258.7),
]


@pytest.mark.parametrize(("p0", "hertz", "s", "phase", "integral", "up", "down"), GAUSSIAN)
def test_gaussian_bursts(
    p0: float, hertz: float, s: float, phase: float, integral: float, up: float, down: float
) -> None:
    t = (np.arange(SAMPLES) - 4700) * INTERVAL
    seen = reduced(p0 * np.exp(-(t**2) / (2 * s**2)) * np.cos(2 * np.pi * hertz * t + phase))
    closed = p0**2 * s * np.sqrt(np.pi) / 2 * (1 + np.cos(2 * phase) * np.exp(-((2 * np.pi * hertz * s) ** 2)))
    assert seen.square_integral_v2s == pytest.approx(integral, rel=2e-4)
    assert seen.square_integral_v2s == pytest.approx(closed, rel=2e-4)
    # between two samples the top is missed by up to 1 - cos(pi f dt), 0.05 % at 10 MHz
    assert (seen.peak_v, -seen.trough_v) == pytest.approx((up, down), rel=6e-4)


@pytest.mark.parametrize(("cycles", "hertz", "integral"), [(3, 5e6, 3e-7), (10, 5e6, 1e-6), (2, 1e6, 1e-6)])
def test_whole_cycles_of_a_sine_give_half_their_duration(cycles: int, hertz: float, integral: float) -> None:
    t = (np.arange(SAMPLES) - 2000) * INTERVAL
    seen = reduced(np.where((t >= 0) & (t < cycles / hertz), np.sin(2 * np.pi * hertz * t), 0.0))
    assert seen.square_integral_v2s == pytest.approx(integral, rel=2e-4)


# p = -ln|1 - r exp(i tau)| turned by psi, a steepened wave: peaks -ln(1 - r) and ln(1 + r) for psi = 0, asin(r) for
# -90° (derived); sum of r^n cos(n tau + psi)/n
@pytest.mark.parametrize(
    ("psi", "up", "down"),
    [(0.0, 2.302585, 0.641854), (-np.pi / 4, 1.903918, 0.729604), (-np.pi / 2, 1.119770, 1.119770)],
)
def test_a_steepened_wave_has_a_higher_positive_peak(psi: float, up: float, down: float) -> None:
    t = np.arange(SAMPLES) * INTERVAL
    wave = -np.real(np.exp(1j * psi) * np.log(1 - 0.9 * np.exp(2j * np.pi * 1e6 * t)))
    seen = reduced(np.where(t > 2e-6, wave, 0.0))
    assert (seen.peak_v, -seen.trough_v) == pytest.approx((up, down), rel=1e-3)
