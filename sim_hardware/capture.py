"""What the simulated oscilloscope asks of the simulated tank for one capture."""

from __future__ import annotations

from dataclasses import dataclass
from typing import Protocol

import numpy as np
from numpy.typing import NDArray


@dataclass(frozen=True)
class Carriage:
    """Where the mechanics really stand: metres and radians, in the coordinates of the stage."""

    x: float
    y: float
    z: float
    theta: float
    phi: float


@dataclass(frozen=True)
class DriveState:
    """What the generator puts out: a tone burst of `amplitude_v` peak to peak, or nothing."""

    on: bool
    frequency_hz: float
    amplitude_v: float
    cycles: int
    repetition_s: float


@dataclass(frozen=True)
class CaptureRequest:
    """One capture.

    Attributes:
        number: counts captures since the simulator started; with the seed it fixes the noise.
        time_s: simulated time of the trigger.
        carriages: where the carriage stood during the averages: one entry when it was still, several, equally
            weighted, when it was moving.
        sample i is taken at `start_s + i / sample_rate_hz` after the trigger.
    """

    number: int
    time_s: float
    carriages: tuple[Carriage, ...]
    drive: DriveState
    sample_rate_hz: float
    points: int
    start_s: float
    averages: int


class Tank(Protocol):
    """Water, source, sensor and preamplifier: everything up to the oscilloscope's input."""

    def voltage(self, request: CaptureRequest) -> NDArray[np.float32]:
        """Shape (points,), volts at the input, averaged, noise included; not yet clipped or quantised."""
        ...

    def thermometer_c(self, time_s: float) -> float:
        """What a thermometer in the water says."""
        ...
