"""From the coarse grid of frequencies to samples, and the burst that goes into it."""

from dataclasses import replace

import numpy as np
import pytest
from hypothesis import given
from hypothesis import strategies as st

from sim_hardware.burst import make_burst, shock_parameter
from sim_hardware.capture import CaptureRequest, Carriage, DriveState
from sim_hardware.interpolation import stencil
from sim_hardware.record import Record, coarse_grid
from sim_hardware.truth import SourceTruth

DRIVE = DriveState(on=True, frequency_hz=2e6, amplitude_v=10.0, cycles=6, repetition_s=1e-3)
REQUEST = CaptureRequest(0, 0.0, (Carriage(0, 0, 0.1, 0, 0),), DRIVE, 200e6, 3000, 10e-6, 1)
SOURCE = SourceTruth(shock_parameter=0.5, harmonics=6, rise_cycles=2)


@given(st.lists(st.floats(2.5, 16.5), min_size=1, max_size=20), st.sampled_from([4, 6, 8]))
def test_interpolation_is_exact_for_polynomials_of_its_degree(positions: list[float], points: int) -> None:
    x = np.array(positions)
    lines, weights = stencil(x, points, lowest=0, highest=19)
    assert lines.min() >= 0
    assert lines.max() <= 19
    for degree in range(points):
        np.testing.assert_allclose(((lines / 10) ** degree * weights).sum(axis=1), (x / 10) ** degree, atol=1e-9)


@given(st.floats(0.5e6, 10e6), st.floats(1.0, 20.0), st.floats(0, 1e-6))
def test_the_drive_and_the_whole_band_stand_on_the_coarse_grid(drive: float, orders: float, reach: float) -> None:
    grid = coarse_grid(drive, orders * drive, reach)
    assert np.abs(grid / drive - 1).min() < 1e-12
    assert grid[-1] >= orders * drive
    assert grid[1] <= 0.25e6 * (1 + 1e-12) or grid[1] <= drive / 2


@pytest.mark.parametrize("delay_us", [9.0, 12.3456, 21.0])
def test_a_flat_spectrum_gives_the_burst_itself_at_its_delay(delay_us: float) -> None:
    burst = make_burst(SOURCE, DRIVE, 20.0)
    coarse = coarse_grid(2e6, 60e6, 0.0)
    record = Record(REQUEST, burst, coarse, 60e6)
    flat = np.ones(coarse.size, np.complex64)
    wave = record.samples(record.spectrum(flat, delay_us * 1e-6) * record.burst)
    t = 10e-6 + np.arange(3000) / 200e6 - delay_us * 1e-6
    np.testing.assert_allclose(wave, burst.samples(t), atol=2e-3 * np.abs(burst.samples(t)).max())


def test_a_delay_beyond_the_record_is_not_heard() -> None:
    record = Record(REQUEST, make_burst(SOURCE, DRIVE, 20.0), coarse_grid(2e6, 20e6, 0.0), 20e6)
    # The record runs from 10 to 25 us; the burst lasts 4 us and is given 2.5 us on either side.
    assert [record.holds(d * 1e-6) for d in (3.0, 6.0, 15.0, 27.0, 28.0)] == [False, True, True, True, False]


def test_a_burst_has_its_cycles_at_half_height_and_ends() -> None:
    burst = make_burst(SOURCE, DRIVE, 20.0)
    t = np.linspace(-1e-6, 6e-6, 7001)
    envelope = burst.envelope(t)
    assert np.ptp(t[envelope > 0.5]) == pytest.approx(6 / 2e6, abs=3e-9)
    assert np.all(burst.samples(t)[(t < 0) | (t > burst.length_s)] == 0)
    abrupt = replace(burst, rise_s=0.0)
    assert np.all(abrupt.envelope(t) == ((t >= 0) & (t < 3e-6)))


def test_steepness_is_worked_out_for_a_plane_wave_where_it_is_not_given() -> None:
    # x_s = 147.8512 mm at 1 MPa and 1 MHz with beta 3.5 (computed independently); beta at 20 C is 3.482 here.
    truth = SourceTruth(reference_distance_mm=147.8512, reference_pressure_kpa=1000)
    found = shock_parameter(truth, replace(DRIVE, frequency_hz=1e6), 20.0)
    assert found == pytest.approx(3.482 / 3.5, rel=1e-3)
    assert shock_parameter(truth, replace(DRIVE, frequency_hz=1e6, amplitude_v=5), 20.0) == pytest.approx(found / 2)
