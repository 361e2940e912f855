"""Simulated motion controller with two-letter commands after the number of an axis: `1PA12.5`.

Axes 1 to 3 are x, y, z in millimetres; 4 and 5 are theta and phi in degrees. Commands give no reply, queries one
line each. Errors wait in a list that is read once. Moves joined in a line start together, or, when one of them
is refused, not at all.
"""

from __future__ import annotations

import re
from collections import deque
from collections.abc import Callable
from dataclasses import replace

from profiles.model import AXES, LINEAR_AXES, Axis
from profiles.units import DEG, MM
from sim_hardware.clock import Timeline
from sim_hardware.motion import AxisLimits, Motion

IDENTITY = "QUIET BASIN STAGE-PREFIX 1.0"
TEXTS = {0: "NO ERROR", 6: "COMMAND DOES NOT EXIST", 7: "PARAMETER OUT OF RANGE", 10: "NOT HOMED"}
UNKNOWN, OUT_OF_RANGE, NOT_HOMED = 6, 7, 10
LONGEST_LINE = 256
ERRORS_KEPT = 10

_UNIT = re.compile(r"(\d*)\s*([A-Z]{2})\s*(\?|[+-]?(?:\d+\.?\d*|\.\d+))?")


class Refused(Exception):
    """Goes on the error list."""

    def __init__(self, number: int) -> None:
        super().__init__(TEXTS[number])
        self.number = number


def _unit(axis: Axis) -> float:
    return MM if axis in LINEAR_AXES else DEG


class PrefixStage:
    """The controller; all who talk to it share it."""

    def __init__(self, motion: Motion, timeline: Timeline) -> None:
        self._motion = motion
        self._timeline = timeline
        self._limits = dict(motion.limits)
        self._errors: deque[int] = deque(maxlen=ERRORS_KEPT)
        self._read: dict[Axis, float] | None = None  # all axes of a line are read at one time
        self._queries: dict[str, Callable[[Axis], str]] = {
            "PA": lambda a: f"{motion.target(a) / _unit(a):.4f}",
            "TP": lambda a: f"{self._reading()[a] / _unit(a):.4f}",
            "MD": lambda a: f"{not motion.moving((a,)):d}",
            "TS": lambda a: f"{motion.moving((a,)):d}",
            "OR": lambda a: f"{a in motion.homed:d}",
            "VA": lambda a: f"{self._limits[a].speed / _unit(a):.4f}",
            "AC": lambda a: f"{self._limits[a].acceleration / _unit(a):.4f}",
        }

    def line(self, text: str) -> list[str]:
        """Replies to the queries of one line."""
        replies: list[str] = []
        moves: dict[Axis, float] = {}
        refused = False
        self._read = None
        for unit in filter(None, (part.strip().upper() for part in text.split(";"))):
            try:
                prefix, command, argument = self._parse(unit)
                if command == "PA" and argument != "?":
                    self._add_move(moves, self._axis(prefix), argument)
                    continue
                self._start(moves, refused)
                replies += self._do(prefix, command, argument)
            except Refused as error:
                refused = refused or "PA" in unit
                self._errors.append(error.number)
        self._start(moves, refused)
        return replies

    def _reading(self) -> dict[Axis, float]:
        if self._read is None:
            self._read = self._motion.reported()
        return self._read

    def _parse(self, unit: str) -> tuple[str, str, str]:
        match = _UNIT.fullmatch(unit)
        if match is None:
            known = re.match(r"\d*\s*(PA|VA|AC)", unit)
            raise Refused(OUT_OF_RANGE if known else UNKNOWN)
        return match.group(1), match.group(2), match.group(3) or ""

    def _axis(self, prefix: str) -> Axis:
        number = int(prefix or "0") if len(prefix) < 3 else 0
        if not 1 <= number <= len(AXES) or AXES[number - 1] not in self._limits:
            raise Refused(OUT_OF_RANGE)
        return AXES[number - 1]

    def _add_move(self, moves: dict[Axis, float], axis: Axis, argument: str) -> None:
        if axis not in self._motion.homed:
            raise Refused(NOT_HOMED)
        if not argument:
            raise Refused(OUT_OF_RANGE)
        moves[axis] = float(argument) * _unit(axis)

    def _start(self, moves: dict[Axis, float], refused: bool) -> None:
        wanted = dict(moves)
        moves.clear()
        if not wanted or refused:
            return
        if self._motion.may_go(wanted):
            self._motion.go_each(wanted, self._limits)
        else:
            self._errors.append(OUT_OF_RANGE)

    def _do(self, prefix: str, command: str, argument: str) -> list[str]:
        if argument == "?":
            return [self._ask(prefix, command)]
        if command == "ST" and not argument:
            self._motion.stop((self._axis(prefix),) if prefix else None)
        elif command == "OR" and not argument:
            self._motion.home((self._axis(prefix),))
        elif command in ("VA", "AC"):
            self._set_limit(self._axis(prefix), command, argument)
        else:
            raise Refused(UNKNOWN)
        return []

    def _ask(self, prefix: str, command: str) -> str:
        if command == "TB":
            number = self._errors.popleft() if self._errors else 0
            return f"{number}, {TEXTS[number]}"
        if command == "VE":
            return IDENTITY
        if command not in self._queries:
            raise Refused(UNKNOWN)
        return self._queries[command](self._axis(prefix))

    def _set_limit(self, axis: Axis, command: str, argument: str) -> None:
        fitted: AxisLimits = self._motion.limits[axis]
        most = fitted.speed if command == "VA" else fitted.acceleration
        value = float(argument or "0") * _unit(axis)
        if not 0 < value <= most * (1 + 1e-9):
            raise Refused(OUT_OF_RANGE)
        now = self._limits[axis]
        self._limits[axis] = replace(now, speed=value) if command == "VA" else replace(now, acceleration=value)


class PrefixSession:
    """One client's line buffer."""

    waiting = False

    def __init__(self, stage: PrefixStage, timeline: Timeline) -> None:
        self._stage = stage
        self._timeline = timeline
        self._partial = bytearray()

    def feed(self, data: bytes) -> list[bytes]:
        """Bytes from the client; what is to be sent now."""
        out: list[bytes] = []
        *lines, rest = (bytes(self._partial) + data).replace(b"\r", b"\n").split(b"\n")
        # one byte more than allowed is kept, so that the line is known to be too long
        self._partial = bytearray(rest[: LONGEST_LINE + 1])
        for line in filter(None, lines):
            self._timeline.run_due()
            text = line[: LONGEST_LINE + 1].decode("ascii", "replace")
            replies = self._stage.line(text if len(line) <= LONGEST_LINE else "TOO LONG")
            out += [f"{reply}\r\n".encode("ascii") for reply in replies]
        return [b"".join(out)] if out else []

    def poll(self) -> list[bytes]:
        """Nothing is ever due later."""
        return []

    def end(self) -> None:
        """The client is gone; the stage goes on with what it was told."""
        self._partial.clear()
