"""The stage: what both command families share. SI inside; millimetres and degrees on the wire."""

from __future__ import annotations

from abc import ABC, abstractmethod
from collections.abc import Mapping
from dataclasses import dataclass
from time import monotonic, sleep
from typing import Any

from drivers.errors import Cancelled, DriverError, InstrumentTimeout, OutOfLimits
from drivers.identity import accepted
from drivers.link import Link, StopAsked
from profiles.bench import AxisTable
from profiles.instrument import Instrument
from profiles.model import LINEAR_AXES, Axis
from profiles.units import DEG, MM

REPORTS_WANTED = 3  # in a row, all alike, before a stage that was seen moving counts as still
REPORTS_PROMPT = 2
LONGEST_PAUSE_S = 0.05
HAIR = 1e-9


@dataclass(frozen=True)
class Travel:
    """Limits and speed of an axis, SI."""

    low: float
    high: float
    speed: float
    acceleration: float


@dataclass(frozen=True)
class Report:
    """What the controller says: position in metres and radians, and whether it is done moving."""

    position: dict[Axis, float]
    done: bool


def unit_of(axis: Axis) -> float:
    """What one unit on the wire is in SI: a millimetre or a degree."""
    return MM if axis in LINEAR_AXES else DEG


def travel_of(axes: AxisTable) -> dict[Axis, Travel]:
    """The axes of a bench with their travel in SI."""
    found: dict[Axis, Travel] = {}
    for axis in axes.present():
        given: Any = getattr(axes, axis)
        if axis in LINEAR_AXES:
            numbers = (given.low_mm, given.high_mm, given.speed_mm_per_s, given.acceleration_mm_per_s2)
        else:
            numbers = (given.low_deg, given.high_deg, given.speed_deg_per_s, given.acceleration_deg_per_s2)
        found[axis] = Travel(*(n * unit_of(axis) for n in numbers))
    return found


class MotionStage(ABC):
    """A stage on a link. A family says how a move, a report, a homing and a stop look on the wire."""

    def __init__(self, link: Link, profile: Instrument, axes: AxisTable) -> None:
        self.link = link
        self.profile = profile
        self.identity = ""
        self.travel = travel_of(axes)
        self.axes = tuple(self.travel)
        words = profile.axis_words or {}
        missing = [a for a in self.axes if a not in words]
        if missing:
            raise OutOfLimits(f"profile {profile.name} has no axis word for {', '.join(missing)}")
        self._words = {a: words[a] for a in self.axes}
        self._from: dict[Axis, float] = {}
        self._to: dict[Axis, float] = {}
        self._prompt = False  # the last move was over before it was asked after
        self._unanswered = False  # a move was sent, and whether it was taken has not been read

    # --- what a family provides -------------------------------------------------------------------------

    @abstractmethod
    def _identify(self) -> str:
        """Ask who is there."""

    @abstractmethod
    def _send_move(self, target: Mapping[Axis, float]) -> None:
        """Send an absolute move, SI; do not wait."""

    @abstractmethod
    def _accepted(self) -> None:
        """See that the move was taken, which takes no time; `InstrumentError` if it was refused."""

    def _report(self) -> Report:
        """Ask where it is; `InstrumentError` if it is in alarm."""
        self._ask_reports(1)
        return self._read_report()

    @abstractmethod
    def _ask_reports(self, count: int) -> None:
        """Send the question for so many reports."""

    @abstractmethod
    def _read_report(self) -> Report:
        """One of the reports that were asked for."""

    @abstractmethod
    def _home(self, timeout_s: float, cancelled: StopAsked | None) -> None:
        """Reference every axis and wait for the end of it."""

    @abstractmethod
    def _halt(self) -> None:
        """Stop every axis at once, and take the answer to a move that nobody has read yet."""

    @abstractmethod
    def referenced(self) -> bool:
        """Whether the controller knows where it is."""

    # --- what the scan uses -----------------------------------------------------------------------------

    def open(self) -> None:
        """Connect and check the identity; nothing moves."""
        self.link.open()
        try:
            self._check_identity()
        except BaseException:
            self.link.close()
            raise

    def close(self) -> None:
        """Stop and close the link; a dead link is no reason to fail."""
        try:
            if not self.link.in_step:
                self.link.reconnect()
                self._unanswered = False
            if self._unanswered or not self._report().done:
                self.stop()
        except DriverError:
            self.link.transcript.add("!", b"could not be stopped at the end")
        finally:
            self.link.close()

    def recover(self) -> None:
        """After the link failed: reconnect and prove identity and reference.

        Raises:
            InstrumentTimeout: the controller was restarted and has lost its position.
        """
        self.link.reconnect()
        self._unanswered = False
        self._check_identity()
        if not self.referenced():
            raise InstrumentTimeout(f"the stage at {self.link.address} has lost its position: home it, then go on")

    def home(self, timeout_s: float, cancelled: StopAsked | None = None) -> None:
        """Reference every axis; afterwards the position is known."""
        self._home(timeout_s, cancelled)
        self._to = dict(self._report().position)

    def start_move(self, target: Mapping[Axis, float]) -> None:
        """Send a move, metres and radians, and return at once.

        Raises:
            OutOfLimits: the target leaves the travel; nothing was sent.
        """
        for axis, value in target.items():
            self._check_limits(axis, value)
        self._send_move(target)
        self._unanswered = True
        self._from, self._to = self._to, dict(target)

    def finish_move(self, timeout_s: float, cancelled: StopAsked | None = None) -> dict[Axis, float]:
        """Until the stage stands still: done by its own word, and several reports alike. Gives the last one.

        Raises:
            InstrumentError: the move was refused, or the stage is in alarm.
            InstrumentTimeout: it still moves after `timeout_s`.
            Cancelled: the operator asked to stop; the stage is stopped.
        """
        start, waited, expected_s = monotonic(), False, 0.0
        self._unanswered = False
        self._accepted()
        while True:
            # where the last move was over before it was asked after, two at once; else one to look
            count = REPORTS_PROMPT if self._prompt else 1
            self._ask_reports(count)
            reports = [self._read_report() for _ in range(count)]
            if reports[0].done and not self._prompt:
                self._ask_reports(REPORTS_WANTED - 1)
                reports += [self._read_report() for _ in range(REPORTS_WANTED - 1)]
            if all(r.done and self._alike(reports[0], r) for r in reports):
                self._prompt = not waited
                report = reports[-1]
                break
            if not waited:
                expected_s = self._duration()
            waited, self._prompt = True, False
            gone = monotonic() - start
            if cancelled is not None and cancelled():
                self.stop()
                raise Cancelled("the move was ended by the operator; the stage was stopped")
            if gone > timeout_s:
                raise InstrumentTimeout(f"the stage at {self.link.address} still moves after {timeout_s:.3g} s")
            sleep(min(LONGEST_PAUSE_S, max(0.0, expected_s - gone) / 2))
        if self.profile.settle_ms:
            sleep(self.profile.settle_ms * 1e-3)
            return self._report().position
        return report.position

    def position(self) -> dict[Axis, float]:
        """Reported position, metres and radians."""
        return self._report().position

    def ask_position(self) -> None:
        """Send the question only, so that another instrument can be asked meanwhile."""
        self._ask_reports(1)

    def read_position(self) -> dict[Axis, float]:
        """The answer to `ask_position`."""
        return self._read_report().position

    def stop(self) -> None:
        """Stop every axis at once."""
        if not self.link.in_step:
            self.link.reconnect()
            self._unanswered = False
        self._halt()
        self._unanswered = False

    # --- inside ----------------------------------------------------------------------------------------

    def _check_identity(self) -> None:
        self.identity = accepted(self._identify(), self.link.address, self.profile)

    def _check_limits(self, axis: Axis, value: float) -> None:
        travel = self.travel.get(axis)
        unit, name = unit_of(axis), "mm" if axis in LINEAR_AXES else "deg"
        if travel is None:
            raise OutOfLimits(f"the stage has no axis {axis}; it has {', '.join(self.axes)}")
        if not travel.low - HAIR <= value <= travel.high + HAIR:
            raise OutOfLimits(
                f"{axis} = {value / unit:.4f} {name} leaves the travel of {travel.low / unit:g} to "
                f"{travel.high / unit:g} {name}; nothing was moved"
            )

    def _duration(self) -> float:
        """About how long the move in hand takes, from distances, speeds and accelerations."""
        longest = 0.0
        for axis, value in self._to.items():
            way = abs(value - self._from.get(axis, value))
            t = self.travel[axis]
            ramp = t.speed**2 / t.acceleration
            seconds = way / t.speed + t.speed / t.acceleration if way > ramp else 2 * (way / t.acceleration) ** 0.5
            longest = max(longest, seconds)
        return longest

    def _alike(self, one: Report, other: Report) -> bool:
        linear = self.profile.still_tolerance_um * 1e-6
        angular = self.profile.still_tolerance_mdeg * 1e-3 * DEG
        return all(
            abs(one.position[a] - other.position[a]) <= (linear if a in LINEAR_AXES else angular) for a in self.axes
        )
