"""Two-letter commands with the number of the axis in front; replies only to questions.

`MD?` says that the controller has finished the move, not that the axis has arrived: the position is compared too.
The error buffer is read once.
"""

from __future__ import annotations

import re
from collections.abc import Mapping
from time import monotonic, sleep

from drivers.errors import InstrumentError, InstrumentTimeout, ProtocolError
from drivers.link import StopAsked
from drivers.stage import LONGEST_PAUSE_S, MotionStage, Report, unit_of
from profiles.model import Axis


class PrefixStage(MotionStage):
    """A controller of that family."""

    def _identify(self) -> str:
        return self.link.query(self.profile.identify)

    def _send_move(self, target: Mapping[Axis, float]) -> None:
        moves = [f"{self._words[axis]}PA{value / unit_of(axis):.4f}" for axis, value in target.items()]
        self.link.write(";".join([*moves, "TB?"]))

    def _accepted(self) -> None:
        self._check_error(self.link.read_line())

    def _check_error(self, reply: str) -> None:
        match = re.match(r"\s*(\d+)\s*,\s*(.*)", reply)
        if not match:
            raise ProtocolError(f"the stage answered {reply!r} when it was asked for its error")
        if int(match[1]):
            raise InstrumentError(f"the stage reports {match[1]}, {match[2].strip()}", int(match[1]))

    def _numbers(self, question: str) -> list[float]:
        """One number from every axis; all are asked in one line."""
        self.link.write(";".join(f"{self._words[axis]}{question}" for axis in self.axes))
        replies = [self.link.read_line() for _ in self.axes]
        try:
            return [float(r) for r in replies]
        except ValueError as error:
            raise ProtocolError(f"the stage answered {replies!r} to {question}") from error

    def _ask_reports(self, count: int) -> None:
        words = [self._words[axis] for axis in self.axes]
        question = [*(f"{w}TP?" for w in words), *(f"{w}MD?" for w in words)]
        self.link.write(";".join(question * count))

    def _read_report(self) -> Report:
        replies = [self.link.read_line() for _ in range(2 * len(self.axes))]
        try:
            numbers = [float(r) for r in replies]
        except ValueError as error:
            raise ProtocolError(f"the stage answered {replies!r} when it was asked where it is") from error
        position = {axis: n * unit_of(axis) for axis, n in zip(self.axes, numbers, strict=False)}
        return Report(position, all(numbers[len(self.axes) :]))

    def referenced(self) -> bool:
        """Whether every axis has been homed."""
        return all(self._numbers("OR?"))

    def _home(self, timeout_s: float, cancelled: StopAsked | None) -> None:
        self.link.write(";".join(f"{self._words[axis]}OR" for axis in self.axes))
        deadline = monotonic() + timeout_s
        while not (self._report().done and self.referenced()):
            if cancelled is not None and cancelled():
                self._halt()
                return
            if monotonic() > deadline:
                raise InstrumentTimeout(f"homing was not done after {timeout_s:.3g} s")
            sleep(LONGEST_PAUSE_S)
        self._check_error(self.link.query("TB?"))

    def _halt(self) -> None:
        self.link.write("ST")
        if self._unanswered:
            self.link.read_line()
