"""The four roles on a bench, as interfaces.

All units SI: volts, seconds, hertz, metres, radians, degrees Celsius for temperature. One thread owns an adapter.
`cancelled` is asked every few tens of milliseconds during a wait; when it says True the wait ends with
`Cancelled`.
"""

from __future__ import annotations

from collections.abc import Mapping
from dataclasses import dataclass
from typing import Protocol

from drivers.link import StopAsked
from drivers.trace import Trace
from profiles.model import Axis


@dataclass(frozen=True)
class CaptureSettings:
    """What one capture is: `points` samples at `sample_rate_hz` from `start_s` after the trigger."""

    sample_rate_hz: float
    points: int
    start_s: float
    averages: int
    full_scale_v: float
    offset_v: float = 0.0


@dataclass(frozen=True)
class Drive:
    """A tone burst: `amplitude_v` peak to peak, `cycles` whole cycles, every `repetition_s`."""

    frequency_hz: float
    amplitude_v: float
    cycles: int
    repetition_s: float


class Instrument(Protocol):
    """Common to all roles."""

    identity: str

    def open(self) -> None:
        """Connect, check identity, clear the error queue, set a known and safe state."""
        ...

    def close(self) -> None:
        """Leave the instrument safe, give its panel back, close the link. Never raises on a dead link."""
        ...


class Oscilloscope(Instrument, Protocol):
    """Captures waveforms."""

    def configure(self, settings: CaptureSettings) -> CaptureSettings:
        """Set up captures; returns what the instrument really does (nearest allowed rate and range)."""
        ...

    def arm(self) -> None:
        """Start one capture (of all its averages)."""
        ...

    def wait(self, timeout_s: float, cancelled: StopAsked | None = None) -> None:
        """Until the capture is complete; `InstrumentTimeout` names what was missing (no trigger)."""
        ...

    def read(self) -> Trace:
        """Fetch the capture. The returned counts are not overwritten by the next read."""
        ...

    def ask_samples(self) -> None:
        """Send the question for the capture only, so that another instrument can be asked meanwhile."""
        ...

    def read_samples(self) -> Trace:
        """The answer to `ask_samples`."""
        ...

    def full_scales_v(self) -> tuple[float, ...]:
        """Ranges that can be set, ascending."""
        ...


class Stage(Instrument, Protocol):
    """Moves the carriage. Positions are the controller's axes: metres and radians."""

    axes: tuple[Axis, ...]

    def home(self, timeout_s: float, cancelled: StopAsked | None = None) -> None:
        """Find the reference of every axis; afterwards the position is known."""
        ...

    def start_move(self, target: Mapping[Axis, float]) -> None:
        """Send the move and return at once; refused (`OutOfLimits`) before a byte is sent if it leaves a limit."""
        ...

    def finish_move(self, timeout_s: float, cancelled: StopAsked | None = None) -> dict[Axis, float]:
        """Until the stage stands still; returns the reported position."""
        ...

    def position(self) -> dict[Axis, float]:
        """Reported position."""
        ...

    def ask_position(self) -> None:
        """Send the question only, so that another instrument can be asked meanwhile."""
        ...

    def read_position(self) -> dict[Axis, float]:
        """The answer to `ask_position`."""
        ...

    def stop(self) -> None:
        """Stop at once."""
        ...


class Generator(Instrument, Protocol):
    """Drives the source."""

    def configure(self, drive: Drive) -> None:
        """Set the burst; the output stays as it is."""
        ...

    def output(self, on: bool) -> None:
        """Switch the drive, and read back that it is so."""
        ...


class Thermometer(Instrument, Protocol):
    """Reads the water temperature; split in two so that a slow instrument does not hold up the scan."""

    def ask_temperature(self) -> None:
        """Send the question."""
        ...

    def answer_ready(self, wait_s: float) -> bool:
        """Whether the reply is there, or comes within `wait_s`."""
        ...

    def answer(self) -> float:
        """The reply, in degrees Celsius."""
        ...
