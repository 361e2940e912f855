"""What is in a record beside the burst: noise, trigger pick-up, sound left from earlier bursts."""

from __future__ import annotations

import math

import numpy as np
from numpy.typing import NDArray

from sim_hardware.capture import CaptureRequest, DriveState
from sim_hardware.truth import ElectronicsTruth, Reverberation

Single = NDArray[np.float32]

_TONES = 24
_REVERBERATION = 0x5EA  # keeps its random numbers apart from those of the captures


def generator(seed: int, number: int) -> np.random.Generator:
    """The random numbers of one capture."""
    return np.random.Generator(np.random.SFC64([seed, number]))


def noise(random: np.random.Generator, points: int, sigma_v: float) -> Single:
    """White noise, shape (points,), volts."""
    wave: Single = random.standard_normal(points, np.float32)
    wave *= np.float32(sigma_v)
    return wave


def sample_times(request: CaptureRequest) -> NDArray[np.float64]:
    """Times of the samples after the trigger, s."""
    return request.start_s + np.arange(request.points) / request.sample_rate_hz


def pickup(request: CaptureRequest, electronics: ElectronicsTruth, reference_drive_v: float) -> Single:
    """The drive's own voltage, coupled into the cable from the trigger on, shape (points,), volts.

    It has the frequency of the drive, lasts `pickup_us` and dies away within it.
    """
    t = sample_times(request)
    length = electronics.pickup_us * 1e-6
    amplitude = electronics.pickup_mv * 1e-3 * request.drive.amplitude_v / reference_drive_v
    fade = np.where((t >= 0) & (t < length), np.cos(math.pi / 2 * np.clip(t / length, 0, 1)) ** 2, 0.0)
    wave: Single = (amplitude * fade * np.sin(2 * np.pi * request.drive.frequency_hz * t)).astype(np.float32)
    return wave


def reverberation(request: CaptureRequest, truth: Reverberation, amplitude_v: float, seed: int) -> Single:
    """What earlier bursts have left in the tank, shape (points,), volts.

    Tones of random phase within the band of the burst, the same at every trigger, so that averaging does not
    remove them; the powers of all earlier bursts add, each decayed since its trigger.

    Args:
        request: the capture.
        truth: level and decay.
        amplitude_v: amplitude of the direct wave at the reference point.
        seed: of the bench.
    """
    drive = request.drive
    decay = truth.decay_ms * 1e-3
    earlier = math.exp(-2 * drive.repetition_s / decay)
    left = truth.level * amplitude_v * math.sqrt(earlier / (1 - earlier)) if earlier < 1 else 0.0
    t = sample_times(request)
    random = np.random.Generator(np.random.PCG64([seed, _REVERBERATION]))
    half_band = drive.frequency_hz / max(drive.cycles, 1) / 2
    tones = drive.frequency_hz + random.uniform(-half_band, half_band, _TONES)
    phases = random.uniform(0, 2 * np.pi, _TONES)
    wave = np.zeros_like(t)
    for tone, phase in zip(tones, phases, strict=True):
        wave += np.cos(2 * np.pi * tone * t + phase)
    scaled: Single = (left * math.sqrt(2 / _TONES) * np.exp(-t / decay) * wave).astype(np.float32)
    return scaled


def mean_jitter(random: np.random.Generator, jitter_s: float, averages: int) -> float:
    """Mean of the trigger's errors over the averages, s."""
    return float(random.standard_normal()) * jitter_s / math.sqrt(averages)


def jitter_loss(frequencies: NDArray[np.float64], jitter_s: float, averages: int) -> Single:
    """What averaging over a jittering trigger leaves of each frequency, its mean error being taken out."""
    variance = jitter_s**2 * (1 - 1 / averages)
    loss: Single = np.exp(-((2 * np.pi * frequencies) ** 2) * variance / 2).astype(np.float32)
    return loss


def is_driven(drive: DriveState) -> bool:
    """Whether anything comes out of the generator."""
    return drive.on and drive.amplitude_v > 0 and drive.cycles > 0
