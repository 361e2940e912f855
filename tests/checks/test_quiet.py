"""Noise near each line: white, shaped, too short to tell, and within one step of the digitiser."""

import numpy as np
import pytest
from hypothesis import given
from hypothesis import strategies as st
from numpy.typing import NDArray

from checks.observation import Pose
from checks.quiet import SHORTEST, Quiet, steps_of
from checks.reduce import ROWS, PointMeta, Reducer
from tests.checks.synthetic import circumstances

LINES = 2.25e6 * np.arange(1.0, 17)
INTERVAL = 4e-9


def shaped(rng: np.random.Generator, count: int, samples: int, corner_hz: float) -> NDArray[np.float64]:
    """Rows of noise through a first-order low-pass, by multiplying its spectrum."""
    f = np.fft.rfftfreq(4 * samples, INTERVAL)
    spectrum = np.fft.rfft(rng.normal(0, 100, (count, 4 * samples)), axis=1) / np.hypot(1, f / corner_hz)
    return np.asarray(np.fft.irfft(spectrum, axis=1)[:, :samples])


def looked(rows: NDArray[np.float64], gate: int = 1600) -> NDArray[np.float64]:
    quiet = Quiet(rows.shape[1], gate, INTERVAL, LINES)
    blocks = [quiet.look(block.astype(np.float32).copy()).sigma for block in np.split(rows, len(rows) // ROWS)]
    return np.concatenate(blocks)


@pytest.mark.parametrize("samples", [SHORTEST - 1, SHORTEST, 700, 3000])
def test_white_noise_gives_what_its_variance_gives(samples: int) -> None:
    sigma = looked(np.random.default_rng(1).normal(5, 30, (400, samples)))
    # 2/N sum v cos has variance 2 s²/N (derived)
    assert np.sqrt(np.mean(sigma**2, axis=0)) == pytest.approx(np.full(16, 30 * np.sqrt(2 / 1600)), rel=0.02)


def test_shaped_noise_is_known_near_each_line() -> None:
    rng, corner, gate = np.random.default_rng(2), 8e6, 1600
    rows = shaped(rng, 800, 700 + gate, corner)
    times = np.arange(gate) * INTERVAL
    parts = rows[:, 700:] @ np.cos(2 * np.pi * np.outer(times, LINES)) * 2 / gate
    stated = np.sqrt(np.mean(looked(rows[:, :700], gate) ** 2, axis=0))
    assert stated / parts.std(axis=0) == pytest.approx(np.ones(16), abs=0.2)
    white = rows[:, :700].std() * np.sqrt(2 / gate)
    assert stated[0] > 1.5 * white  # as if it were white, the low lines would be taken for better than they are
    assert stated[-1] < 0.8 * white


def test_a_quiet_part_within_one_step_is_not_taken_for_silence() -> None:
    c = circumstances()
    here = Pose(0, 0, 0.12)
    counts = np.zeros(2500, np.int8)
    counts[800:2200] = np.rint(100 * np.sin(np.arange(1400) * 2 * np.pi * 2.25e6 * INTERVAL)).astype(np.int8)
    meta = PointMeta(0, True, 0, here, here, here, 0.0, 20.0, 1e-3, 0.0, -128, 127)
    seen = Reducer(c).reduce([counts], [meta])[0]
    # a rectangular distribution one step wide has a standard deviation of 1/sqrt(12) of it (JCGM 100:2008, F.2.2.1)
    assert seen.component_noise_v == pytest.approx(np.full(16, 1e-3 / np.sqrt(12) * np.sqrt(2 / 1600)), rel=1e-5)
    assert seen.noise_rms_v == 0.0


@pytest.mark.parametrize("low_bits", [0, 0x80, 0xFF])
def test_eight_bits_that_are_padded_to_sixteen_mean_the_same_noise(low_bits: int) -> None:
    c = circumstances()
    here = Pose(0, 0, 0.12)
    counts = np.zeros(2500, np.int16)
    counts[800:2200] = np.rint(100 * np.sin(np.arange(1400) * 2 * np.pi * 2.25e6 * INTERVAL)).astype(np.int16)
    padded = (counts << 8) | np.int16(low_bits)
    meta = PointMeta(0, True, 0, here, here, here, 0.0, 20.0, 1e-3 / 256, 0.0, -32768, 32767)
    seen = Reducer(c).reduce([padded], [meta])[0]
    # as in the test above: the step is that of the eight bits, 1 mV, whatever fills the others
    assert seen.component_noise_v == pytest.approx(np.full(16, 1e-3 / np.sqrt(12) * np.sqrt(2 / 1600)), rel=1e-5)


@given(
    rows=st.lists(st.lists(st.integers(-128, 127), min_size=70, max_size=70), min_size=1, max_size=8),
    shift=st.integers(0, 8),
)
def test_a_step_is_never_more_than_what_two_samples_differ_by(rows: list[list[int]], shift: int) -> None:
    codes = np.array(rows, np.int16)
    padded = codes << shift
    for row, step in zip(padded.astype(np.int64), steps_of(padded), strict=True):
        apart = np.abs(np.subtract.outer(row, row))
        divisor = int(np.gcd.reduce(apart, axis=None))  # the largest step that all of them are whole multiples of
        assert step == (divisor & -divisor or 1)
        assert step == 1 or step >= 1 << shift
