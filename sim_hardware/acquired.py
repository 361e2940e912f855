"""One complete capture in the oscilloscope's memory, and where captures come from."""

from __future__ import annotations

from collections.abc import Callable, Mapping
from dataclasses import dataclass, field, replace
from typing import Protocol

import numpy as np
from numpy.typing import NDArray

from sim_hardware.capture import CaptureRequest, DriveState, Tank
from sim_hardware.digitise import Codes, quantise
from sim_hardware.motion import Motion

CHANNELS = 4
CARRIAGES = 8  # places at which a capture is computed when the stage moved during it


@dataclass(frozen=True)
class Range:
    """Vertical setting of one channel: `full_scale_v` across all codes, centred on `offset_v`."""

    full_scale_v: float
    offset_v: float = 0.0


@dataclass(frozen=True)
class Settings:
    """All that decides what a capture is."""

    sample_rate_hz: float
    points: int
    start_s: float
    averages: int
    ranges: Mapping[int, Range]

    def with_range(self, channel: int, setting: Range) -> Settings:
        """The same with another vertical setting."""
        return replace(self, ranges={**self.ranges, channel: setting})

    @property
    def span_s(self) -> float:
        """From the trigger to the last sample."""
        return max(0.0, self.start_s + self.points / self.sample_rate_hz)


@dataclass(frozen=True)
class Shot:
    """A capture whose last trigger has come: settings at arming, and runs of triggers (first, step, how many)."""

    number: int
    settings: Settings
    runs: tuple[tuple[float, float, int], ...]

    def trigger_times(self, most: int) -> list[float]:
        """Times of the triggers, at most that many, evenly picked with first and last."""
        total = sum(n for _, _, n in self.runs)
        picked = sorted({round(i) for i in np.linspace(0, total - 1, min(most, total))})
        times: list[float] = []
        before = 0
        for first, step, count in self.runs:
            times += [first + (i - before) * step for i in picked if before <= i < before + count]
            before += count
        return times


class Acquired(Protocol):
    """What the transfer commands need of a capture.

    A signed code c is `c * volts_per_count + volts_at_zero` volts. `reference` is the code that the instrument
    uses as its reference point in what it tells of its scaling.
    """

    @property
    def points(self) -> int:
        """Samples."""
        ...

    @property
    def averages(self) -> int:
        """Triggers averaged."""
        ...

    @property
    def interval_s(self) -> float:
        """Between samples."""
        ...

    @property
    def start_s(self) -> float:
        """Of the first sample after the trigger."""
        ...

    @property
    def x_reference(self) -> int:
        """The sample used as reference point."""
        ...

    def codes(self, channel: int, bits: int) -> Codes:
        """Signed codes; raises `ScpiError` when this capture cannot be given so."""
        ...

    def scale(self, channel: int, bits: int) -> tuple[float, float]:
        """volts_per_count and volts_at_zero."""
        ...

    def y_reference(self, bits: int) -> int:
        """The signed code used as reference point."""
        ...

    def prepare(self) -> bool:
        """Do some work ahead of the transfer; False when nothing is left to do."""
        ...


class CaptureSource(Protocol):
    """Where captures come from: the tank, or a bank."""

    def arm(self) -> None:
        """A capture is about to be taken; raises `ScpiError` when none can be."""
        ...

    def foresee(self, shot: Shot) -> bool:
        """Work ahead on a capture whose triggers are expected; False when nothing is left to do."""
        ...

    def take(self, shot: Shot) -> Acquired:
        """Called at the simulated time of the end of the capture."""
        ...


@dataclass
class LiveCapture:
    """Computed from the tank when first needed. Its reference points are not zero: forgetting them shows."""

    request: CaptureRequest
    tank: Tank
    ranges: Mapping[int, Range]
    sensor_channel: int
    x_reference: int = 16
    _volts: NDArray[np.float32] | None = None
    _codes: dict[tuple[int, int], Codes] = field(default_factory=dict)

    @property
    def points(self) -> int:
        """Samples."""
        return self.request.points

    @property
    def averages(self) -> int:
        """Triggers averaged."""
        return self.request.averages

    @property
    def interval_s(self) -> float:
        """Between samples."""
        return 1.0 / self.request.sample_rate_hz

    @property
    def start_s(self) -> float:
        """Of the first sample after the trigger."""
        return self.request.start_s

    def y_reference(self, bits: int) -> int:
        """Arbitrary, but not zero."""
        return 5 if bits == 8 else 640

    def scale(self, channel: int, bits: int) -> tuple[float, float]:
        """From the vertical setting at the time of arming."""
        setting = self.ranges[channel]
        return setting.full_scale_v / 2.0**bits, setting.offset_v

    def codes(self, channel: int, bits: int) -> Codes:
        """Channels without the sensor see nothing."""
        key = (channel, bits)
        if key not in self._codes:
            setting = self.ranges[channel]
            volts = self.volts() if channel == self.sensor_channel else np.zeros(self.points, np.float32)
            self._codes[key] = quantise(volts, setting.full_scale_v, setting.offset_v, bits)
        return self._codes[key]

    def volts(self) -> NDArray[np.float32]:
        """At the input."""
        if self._volts is None:
            self._volts = self.tank.voltage(self.request)
        return self._volts

    def prepare(self) -> bool:
        """Compute the voltage while the client does something else."""
        if self._volts is not None:
            return False
        self.volts()
        return True


class LiveSource:
    """Captures of the tank: the carriage as it stood at the triggers, the drive as it is."""

    def __init__(self, tank: Tank, motion: Motion, drive: Callable[[], DriveState], sensor_channel: int) -> None:
        self._tank, self._motion, self._drive, self._channel = tank, motion, drive, sensor_channel
        self._foreseen: LiveCapture | None = None

    def arm(self) -> None:
        """Always possible."""

    def foresee(self, shot: Shot) -> bool:
        """Compute the capture that is under way, if nothing changes before it ends."""
        if self._foreseen is not None and self._foreseen.request.number == shot.number:
            return False
        self._foreseen = self._capture(shot)
        return self._foreseen.prepare()

    def take(self, shot: Shot) -> LiveCapture:
        """What was foreseen, or, when the stage or the drive did something else, computed anew."""
        capture = self._capture(shot)
        foreseen, self._foreseen = self._foreseen, None
        return foreseen if foreseen is not None and foreseen.request == capture.request else capture

    def _capture(self, shot: Shot) -> LiveCapture:
        """At one place when the carriage was still, else at several that count equally."""
        times = shot.trigger_times(CARRIAGES)
        if self._motion.still_between(times[0], times[-1]):
            times = times[:1]
        settings = shot.settings
        request = CaptureRequest(
            number=shot.number,
            time_s=times[0],
            carriages=tuple(self._motion.carriage(t) for t in times),
            drive=self._drive(),
            sample_rate_hz=settings.sample_rate_hz,
            points=settings.points,
            start_s=settings.start_s,
            averages=settings.averages,
        )
        return LiveCapture(request, self._tank, settings.ranges, self._channel)
