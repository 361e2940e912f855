"""Simulated motion controller that speaks ISO 6983 words, with `ok` and `error` for each line.

Axis words X Y Z in millimetres, B (about y) and C (about z) in degrees. `ok` says that a line was taken, not
that the stage has arrived. Single characters outside the queue: `?` report, `!` hold, `~` resume, 0x18 reset.
"""

from __future__ import annotations

import re
from collections import deque
from collections.abc import Callable, Mapping
from typing import NamedTuple

from profiles.model import LINEAR_AXES, Axis
from profiles.units import DEG, MM
from sim_hardware.clock import Timeline
from sim_hardware.iso_words import (
    BAD_NUMBER,
    BAD_WORD,
    BEYOND_TRAVEL,
    LOCKED,
    UNSUPPORTED,
    Refused,
    words_of,
)
from sim_hardware.motion import Motion

AXIS_WORDS: dict[str, Axis] = {"X": "x", "Y": "y", "Z": "z", "B": "theta", "C": "phi"}
IDENTITY = b"[VER:QUIET BASIN STAGE-ISO 1.0]\n"
GREETING = b"STAGE-ISO 1.0 ready\n"
OK = b"ok\n"
QUEUE = 16  # moves that fit; the `ok` of one more comes when there is room
LONGEST_LINE = 256
LONGEST_DWELL_S = 3600.0
INCH = 25.4


class Later(NamedTuple):
    """`ok` when `done` says so."""

    done: Callable[[], bool]


class Queued(NamedTuple):
    """A move that was taken."""

    end_s: float
    targets: dict[Axis, float]
    feed: float | None


class IsoStage:
    """The controller: modal state, queue, hold and alarm. All who talk to it share it."""

    def __init__(self, motion: Motion, timeline: Timeline) -> None:
        self._motion = motion
        self._timeline = timeline
        self._queue: deque[Queued] = deque()
        self._held: list[Queued] | None = None
        self._homing = False
        self._alarm = True
        self._power_on_modes()

    def _power_on_modes(self) -> None:
        self._absolute, self._unit, self._rapid = True, 1.0, True
        self._feed: float | None = None
        self._target = {a: self._motion.target(a) for a in self._motion.limits}

    # single characters

    def report(self) -> bytes:
        """State and position."""
        self._timeline.run_due()
        place = self._motion.reported()
        numbers = ",".join(
            f"{place.get(axis, 0.0) / (MM if axis in LINEAR_AXES else DEG):.4f}" for axis in AXIS_WORDS.values()
        )
        return f"<{self._state()}|MPos:{numbers}|Bf:{QUEUE - len(self._waiting_moves())}>\n".encode("ascii")

    def _state(self) -> str:
        if self._homing:
            return "Home"
        if self._alarm:
            return "Alarm"
        if self._held is not None:
            return "Hold"
        return "Run" if self._motion.moving() else "Idle"

    def hold(self) -> None:
        """Brake on the path; what is left of it waits for `resume`. Homing that is held is lost."""
        if self._homing:
            self._homing = False
            self._motion.stop()
        elif self._held is None and self._motion.moving():
            self._held = list(self._waiting_moves())
            self._queue.clear()
            self._motion.stop()

    def resume(self) -> None:
        """Go on with what was held."""
        held, self._held = self._held, None
        for move in held or ():
            self._start(move.targets, move.feed)

    def reset(self) -> bytes:
        """As at power-on; when it was moving, the position is lost. The greeting."""
        if self._motion.moving():
            self._motion.halt()
            self._alarm = True
        self._homing, self._held = False, None
        self._queue.clear()
        self._power_on_modes()
        return GREETING

    # lines

    def line(self, text: str) -> bytes | Later:
        """Reply to one line."""
        try:
            if text.startswith("$"):
                return self._system(text.strip().upper())
            words = words_of(text)
            if not words:
                return OK
            return self._words(words)
        except Refused as refused:
            return b"error:%d\n" % refused.number

    def _system(self, text: str) -> bytes | Later:
        if text == "$I":
            return IDENTITY + OK
        if text != "$H":
            raise Refused(UNSUPPORTED)
        if self._held is not None or self._motion.moving():
            raise Refused(LOCKED)
        self._homing = self._alarm = True
        self._motion.home()
        return Later(self._homed)

    def _homed(self) -> bool:
        if self._homing and not self._motion.moving() and self._motion.homed >= set(self._motion.limits):
            self._homing = self._alarm = False
            self._target = {a: self._motion.target(a) for a in self._motion.limits}
        return not self._homing

    def _words(self, words: dict[str, list[float]]) -> bytes | Later:
        if self._alarm:
            raise Refused(LOCKED)
        dwell = self._modes(words.pop("G", []), "P" in words)
        feed = words.pop("F", None)
        if feed is not None:
            if feed[0] <= 0:
                raise Refused(BAD_NUMBER)
            self._feed = feed[0]
        if dwell:
            seconds = words.pop("P")[0]
            if words:
                raise Refused(BAD_WORD)
            if not 0 <= seconds <= LONGEST_DWELL_S:
                raise Refused(BAD_NUMBER)
            return self._dwell(seconds)
        targets = self._targets(words)
        if targets:
            self._move(targets)
        if len(self._waiting_moves()) > QUEUE:
            return Later(lambda: len(self._waiting_moves()) <= QUEUE)
        return OK

    def _modes(self, codes: list[float], has_pause: bool) -> bool:
        """Set the modal state; True for a dwell."""
        if not set(codes) <= {0, 1, 4, 20, 21, 90, 91, 94}:
            raise Refused(UNSUPPORTED)
        for group in ({0, 1, 4}, {20, 21}, {90, 91}):
            if len(group & set(codes)) > 1:
                raise Refused(BAD_WORD)
        if (4 in codes) != has_pause:
            raise Refused(BAD_WORD)
        for code in codes:
            if code in (0, 1):
                self._rapid = code == 0
            elif code in (20, 21):
                self._unit = INCH if code == 20 else 1.0
            elif code in (90, 91):
                self._absolute = code == 90
        return 4 in codes

    def _targets(self, words: dict[str, list[float]]) -> dict[Axis, float]:
        targets: dict[Axis, float] = {}
        for letter, (number,) in words.items():
            axis = AXIS_WORDS.get(letter)
            if axis is None or axis not in self._motion.limits:
                raise Refused(UNSUPPORTED)
            value = number * (MM * self._unit if axis in LINEAR_AXES else DEG)
            targets[axis] = value if self._absolute else self._target[axis] + value
        return targets

    def _move(self, targets: dict[Axis, float]) -> None:
        everything = {**self._target, **targets}
        if not self._motion.may_go(everything):
            raise Refused(BEYOND_TRAVEL)
        self._target = everything
        feed = None if self._rapid or self._feed is None else self._feed * self._feed_unit(targets) / 60
        if self._held is not None:
            self._held.append(Queued(0.0, targets, feed))
        else:
            self._start(targets, feed)

    def _feed_unit(self, targets: Mapping[Axis, float]) -> float:
        linear = any(a in LINEAR_AXES and abs(v - self._motion.target(a)) > 1e-10 for a, v in targets.items())
        return MM * self._unit if linear else DEG

    def _start(self, targets: dict[Axis, float], feed: float | None) -> None:
        self._motion.go_together(targets, feed)
        self._queue.append(Queued(self._motion.end_s(), targets, feed))

    def _waiting_moves(self) -> deque[Queued] | list[Queued]:
        now = self._timeline.now()
        while self._queue and self._queue[0].end_s <= now:
            self._queue.popleft()
        return self._queue if self._held is None else self._held

    def _dwell(self, seconds: float) -> Later:
        """Motion first, then the pause."""
        until: list[float] = []

        def done() -> bool:
            if self._alarm:
                return True
            if self._held is not None or self._motion.moving():
                return False
            if not until:
                until.append(max(asked, self._motion.end_s()) + seconds)
                self._timeline.schedule(until[0], lambda: None)
            return self._timeline.now() >= until[0]

        asked = self._timeline.now()
        return Later(done)


class IsoSession:
    """One client's line buffer and the replies that it waits for."""

    def __init__(self, stage: IsoStage, timeline: Timeline) -> None:
        self._stage = stage
        self._timeline = timeline
        self._partial = bytearray()
        self._lines: deque[bytes] = deque()
        self._later: Later | None = None

    @property
    def waiting(self) -> bool:
        """An `ok` is due later."""
        return self._later is not None

    def feed(self, data: bytes) -> list[bytes]:
        """Bytes from the client; what is to be sent now."""
        if data == b"?":
            return [self._stage.report()]
        out: list[bytes] = []
        for piece in re.split(rb"([?!~\x18\r\n])", data):
            if piece in (b"\n", b"\r"):
                self._lines.append(bytes(self._partial))
                self._partial.clear()
                out += self.poll()
            elif piece == b"?":
                out.append(self._stage.report())
            elif piece == b"\x18":
                self._timeline.run_due()
                self._partial.clear()
                self._lines.clear()
                self._later = None
                out.append(self._stage.reset())
            elif piece in (b"!", b"~"):
                self._timeline.run_due()
                (self._stage.hold if piece == b"!" else self._stage.resume)()
                out += self.poll()
            else:
                self._partial += piece[: LONGEST_LINE + 1 - len(self._partial)]
        return out

    def poll(self) -> list[bytes]:
        """Replies that are ready; lines wait for the reply of the line before."""
        out: list[bytes] = []
        while True:
            self._timeline.run_due()
            if self._later is not None:
                if not self._later.done():
                    if not self._timeline.run_due():
                        return out
                    continue
                self._later = None
                out.append(OK)
            if not self._lines:
                return out
            line = self._lines.popleft()
            if not line.strip():
                continue
            reply = self._reply(line)
            if isinstance(reply, Later):
                self._later = reply
            else:
                out.append(reply)

    def _reply(self, line: bytes) -> bytes | Later:
        if len(line) > LONGEST_LINE or not line.isascii():
            return b"error:%d\n" % BAD_WORD
        return self._stage.line(line.decode("ascii"))

    def end(self) -> None:
        """The client is gone; the stage goes on with what it was told."""
        self._partial.clear()
        self._lines.clear()
        self._later = None
