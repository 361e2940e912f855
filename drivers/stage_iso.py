"""ISO 6983 words: `ok` or `error:n` to every line, reports in angle brackets, single characters outside the queue.

`ok` means that a line was queued, not that anything has moved. Every move carries the whole modal state (absolute,
millimetres), for a forgotten relative or inch mode is a crash.
"""

from __future__ import annotations

import re
from collections.abc import Mapping
from time import monotonic

from drivers.errors import InstrumentError, InstrumentTimeout, LinkTimeout, ProtocolError
from drivers.link import StopAsked
from drivers.stage import MotionStage, Report, unit_of
from profiles.model import Axis

REPORT = re.compile(r"^<(\w+)(?::\d+)?\|MPos:([^|>]+)[|>]")
ORDER = ("X", "Y", "Z", "B", "C")  # of the coordinates in a report
MODES = "G90 G21 G0"
HOLD, RESET = b"!", b"\x18"
RESTART_S = 2.0
ERRORS = {
    1: "a word was not understood",
    2: "a number was not understood",
    9: "it is locked after an alarm: home it",
    15: "the target lies beyond its travel",
    20: "a word is not supported",
}


class IsoStage(MotionStage):
    """A controller of that family."""

    def _identify(self) -> str:
        self._drain()
        self.link.write(self.profile.identify)
        reply = self.link.read_line()
        self._until_ok(self.link.timeout_s, None)
        return reply

    def _drain(self) -> None:
        """Take what an opening or a restart may have said: everything before an answered report request."""
        self.link.write_raw(b"?")
        while not self.link.read_line().startswith("<"):
            pass

    def _until_ok(self, timeout_s: float, cancelled: StopAsked | None) -> None:
        while True:
            reply = self.link.read_line(timeout_s, cancelled)
            if reply == "ok":
                return
            match = re.match(r"(error|ALARM):(\d+)", reply)
            if match:
                number = int(match[2])
                told = ERRORS.get(number, "see the controller's manual") if match[1] == "error" else "home it again"
                raise InstrumentError(f"the stage answered {reply}: {told}", number)

    def _send_move(self, target: Mapping[Axis, float]) -> None:
        words = " ".join(f"{self._words[axis]}{value / unit_of(axis):.4f}" for axis, value in target.items())
        self.link.write(f"{MODES} {words}")

    def _accepted(self) -> None:
        self._until_ok(self.link.timeout_s, None)

    def _ask_reports(self, count: int) -> None:
        self.link.write_raw(b"?" * count)

    def _state(self) -> tuple[str, dict[Axis, float]]:
        reply = self.link.read_line()
        match = REPORT.match(reply)
        try:
            state, numbers = match.groups() if match else ("", "")
            values = dict(zip(ORDER, (float(v) for v in numbers.split(",")), strict=False))
            return state, {axis: values[self._words[axis]] * unit_of(axis) for axis in self.axes}
        except (ValueError, KeyError) as error:
            raise ProtocolError(f"the stage answered {reply!r} to a request for its report") from error

    def _read_report(self) -> Report:
        state, position = self._state()
        if state == "Alarm":
            raise InstrumentError("the stage is in alarm, its position may be lost: home it")
        return Report(position, state == "Idle")

    def referenced(self) -> bool:
        """Whether it is free of an alarm."""
        self._ask_reports(1)
        return self._state()[0] != "Alarm"

    def _home(self, timeout_s: float, cancelled: StopAsked | None) -> None:
        self.link.write("$H")
        try:
            self._until_ok(timeout_s, cancelled)
        except LinkTimeout as error:
            self.link.reconnect()
            raise InstrumentTimeout(f"homing was not done after {timeout_s:.3g} s") from error

    def _halt(self) -> None:
        """Hold, then reset: the queue is emptied. A controller that was moving then asks to be homed."""
        self.link.write_raw(HOLD)
        self.link.write_raw(RESET)
        deadline = monotonic() + RESTART_S
        self.link.write_raw(b"?")
        while not self.link.read_line(max(0.05, deadline - monotonic())).startswith("<"):
            pass
