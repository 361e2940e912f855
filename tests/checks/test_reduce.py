"""From counts to observations: known sines, offset, noise, rails, and batches that do not matter."""

from dataclasses import replace
from itertools import pairwise

import numpy as np
import pytest
from hypothesis import given, settings
from hypothesis import strategies as st
from numpy.typing import NDArray

from checks.observation import Gate, Observation, Pose
from checks.reduce import ROWS, PointMeta, Reducer
from tests.checks.synthetic import DRIVE_HZ, circumstances

SAMPLES = 2500
GAIN = 2e-6
HERE = Pose(0, 0, 0.12)
# the gate holds a whole number of cycles: 1600 samples of 4 ns at 2.5 MHz are 16 cycles
WHOLE = circumstances(frequencies_hz=2.5e6 * np.arange(1.0, 9), side_lines_hz=np.array([2.4e6, 2.6e6]), drive_hz=2.5e6)


def meta(index: int, zero: float = 0.0) -> PointMeta:
    return PointMeta(index, False, 0, HERE, HERE, HERE, 0.0, 20.0, GAIN, zero, -32768, 32767)


def counts_of(volts: NDArray[np.float64]) -> NDArray[np.int16]:
    return np.clip(np.rint(volts / GAIN), -32768, 32767).astype(np.int16)


def times() -> NDArray[np.float64]:
    return np.asarray(WHOLE.record_start_s + np.arange(SAMPLES) * WHOLE.sample_interval_s, np.float64)


@pytest.mark.parametrize("line", [0, 3, 7])
def test_a_steady_sine_gives_its_amplitude_and_phase_at_the_trigger(line: int) -> None:
    amplitude, phase = 0.03, 0.7
    volts = amplitude * np.cos(2 * np.pi * WHOLE.frequencies_hz[line] * times() + phase)
    volts[: WHOLE.gate.quiet_stop] = 0.0
    seen = Reducer(WHOLE).reduce([counts_of(volts)], [meta(0)])[0]
    expected = np.zeros(8, complex)
    expected[line] = amplitude * np.exp(1j * phase)
    assert np.abs(seen.components - expected).max() < 2e-6
    missed = amplitude * (1 - np.cos(np.pi * WHOLE.frequencies_hz[line] * WHOLE.sample_interval_s))  # between samples
    assert seen.peak_v == pytest.approx(amplitude, abs=GAIN * 2 + missed)
    assert seen.trough_v == pytest.approx(-amplitude, abs=GAIN * 2 + missed)
    gate_s = 1600 * WHOLE.sample_interval_s
    assert seen.square_integral_v2s == pytest.approx(amplitude**2 / 2 * gate_s, rel=1e-3)


@pytest.mark.parametrize("offset", [-0.02, 0.0123])
def test_an_offset_is_reported_and_does_not_leak_into_the_components(offset: float) -> None:
    # eight and a half cycles, so that a constant would leak into every line
    cut = replace(WHOLE, gate=Gate(800, 1650, 0, 700))
    volts = 0.02 * np.cos(2 * np.pi * 2.5e6 * times()) * (np.arange(SAMPLES) >= 750)
    bare = Reducer(cut).reduce([counts_of(volts)], [meta(0)])[0]
    lifted = Reducer(cut).reduce([counts_of(volts + offset)], [meta(0, zero=0.5)])[0]
    assert np.abs(lifted.components - bare.components).max() < 1e-6
    assert lifted.offset_v == pytest.approx(offset + 0.5, abs=GAIN)
    assert lifted.peak_v == pytest.approx(bare.peak_v, abs=2 * GAIN)


def test_stated_noise_is_the_scatter_of_the_components() -> None:
    rng, sigma = np.random.default_rng(3), 4e-4
    reducer = Reducer(WHOLE)
    seen = [reducer.reduce([counts_of(rng.normal(0, sigma, SAMPLES))], [meta(i)])[0] for i in range(400)]
    parts = np.array([o.components for o in seen])
    # sigma sqrt(2/N) for N samples: white noise, propagated through 2/N sum v cos (derived)
    expected = sigma * np.sqrt(2 / 1600)
    assert parts.real.std() == pytest.approx(expected, rel=0.06)
    assert parts.imag.std() == pytest.approx(expected, rel=0.06)
    assert np.mean([o.component_noise_v[0] for o in seen]) == pytest.approx(expected, rel=0.02)
    assert np.mean([o.noise_rms_v for o in seen]) == pytest.approx(sigma, rel=0.01)


def test_rails_are_counted_over_the_whole_record_and_the_range_in_use_is_told() -> None:
    counts = np.zeros(SAMPLES, np.int16)
    counts[5:8], counts[2450:2452] = 32767, -32768
    seen = Reducer(WHOLE).reduce([counts], [meta(0)])[0]
    assert (seen.clipped_high, seen.clipped_low, seen.range_use) == (3, 2, 1.0)
    quarter = np.zeros(SAMPLES, np.int16)
    quarter[1000] = 8192
    seen = Reducer(WHOLE).reduce([quarter], [meta(0)])[0]
    assert (seen.clipped_high, seen.clipped_low) == (0, 0)
    assert seen.range_use == pytest.approx(0.25, abs=1e-4)


@settings(max_examples=60, deadline=None)
@given(
    st.integers(0, 2**32 - 1),
    st.lists(st.integers(1, ROWS - 1), max_size=4, unique=True),
    st.booleans(),
    st.integers(0, 33),
    st.integers(0, 9),
)
def test_how_points_are_batched_does_not_change_a_bit(
    seed: int, cuts: list[int], eight_bit: bool, longer: int, lines: int
) -> None:
    # odd lengths, so that rows do not start at round addresses
    c = circumstances(lines=1 + lines, gate=Gate(801, 1600 + longer, 3, 700 - longer))
    rng = np.random.default_rng(seed)
    kind = np.int8 if eight_bit else np.int16
    info = np.iinfo(kind)
    block = rng.integers(info.min, info.max, (ROWS, SAMPLES), dtype=kind)
    metas = [meta(64 + i) for i in range(ROWS)]
    whole = Reducer(c).reduce(list(block), metas)
    edges = [0, *sorted(cuts), ROWS]
    reducer = Reducer(c)
    parts: list[Observation] = []
    for a, b in pairwise(edges):
        parts += reducer.reduce(list(block[a:b]), metas[a:b])
    for one, other in zip(whole, parts, strict=True):
        assert one.components.tobytes() == other.components.tobytes()
        assert one.side_components.tobytes() == other.side_components.tobytes()
        assert one.component_noise_v.tobytes() == other.component_noise_v.tobytes()
        assert one.square_integral_v2s == other.square_integral_v2s
        assert (one.peak_v, one.trough_v, one.noise_rms_v) == (other.peak_v, other.trough_v, other.noise_rms_v)


def test_the_generator_of_these_tests_and_the_reduction_agree_on_the_sign_of_time() -> None:
    c = circumstances()
    delay = 81e-6
    burst = (times() >= delay) & (times() < delay + 8 / DRIVE_HZ)
    volts = 0.03 * np.cos(2 * np.pi * DRIVE_HZ * (times() - delay)) * burst
    seen = Reducer(c).reduce([counts_of(volts)], [meta(0)])[0]
    assert np.angle(seen.components[0] * np.exp(2j * np.pi * DRIVE_HZ * delay)) == pytest.approx(0.0, abs=0.02)
