"""Noise, pick-up, reverberation and jitter."""

import numpy as np
import pytest

from sim_hardware import disturbance
from sim_hardware.capture import CaptureRequest, Carriage, DriveState
from sim_hardware.truth import ElectronicsTruth, Reverberation


def request(start_s: float = -1e-6, repetition_s: float = 1e-3) -> CaptureRequest:
    drive = DriveState(on=True, frequency_hz=2e6, amplitude_v=5.0, cycles=8, repetition_s=repetition_s)
    return CaptureRequest(0, 0.0, (Carriage(0, 0, 0.1, 0, 0),), drive, 100e6, 2000, start_s, 1)


def test_pickup_starts_at_the_trigger_and_ends_in_time() -> None:
    wave = disturbance.pickup(request(), ElectronicsTruth(pickup_mv=10, pickup_us=3), reference_drive_v=10)
    t = disturbance.sample_times(request())
    assert np.all(wave[t < 0] == 0)
    assert np.all(wave[t > 3e-6] == 0)
    # Half the reference drive gives half of it; the fade has begun by the first crest.
    assert np.abs(wave).max() == pytest.approx(5e-3, rel=0.03)


def test_reverberation_lasts_over_the_pause_and_dies_with_it() -> None:
    truth = Reverberation(level=0.1, decay_ms=0.5)
    soon = disturbance.reverberation(request(repetition_s=0.5e-3), truth, 1.0, seed=1)
    late = disturbance.reverberation(request(repetition_s=5e-3), truth, 1.0, seed=1)
    assert np.std(late) < 1e-3 * np.std(soon)
    # Powers of all bursts before: e^-2 / (1 - e^-2) for a pause of one decay time; few tones, so a wide margin.
    assert np.std(soon) == pytest.approx(0.1 * np.sqrt(1 / (np.e**2 - 1)), rel=0.35)


def test_a_jittering_trigger_loses_as_much_as_the_mean_of_many() -> None:
    sigma, f = 4e-9, np.array([2e6, 20e6])
    drawn = np.random.default_rng(0).normal(0, sigma, 20_000)
    expected = np.abs(np.exp(-2j * np.pi * f[:, None] * drawn).mean(axis=1))
    np.testing.assert_allclose(disturbance.jitter_loss(f, sigma, 20_000), expected, atol=5e-3)
    np.testing.assert_array_equal(disturbance.jitter_loss(f, sigma, 1), [1, 1])


@pytest.mark.parametrize("change", [{"on": False}, {"amplitude_v": 0.0}, {"cycles": 0}])
def test_nothing_is_driven_without_output_amplitude_or_cycles(change: dict[str, float]) -> None:
    state = {"on": True, "frequency_hz": 1e6, "amplitude_v": 1.0, "cycles": 5, "repetition_s": 1e-3} | change
    assert not disturbance.is_driven(DriveState(**state))  # type: ignore[arg-type]
