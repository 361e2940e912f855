"""SCPI without input or output: bytes in, bytes out.

`ScpiInstrument` holds the state that all clients of an instrument share (registers, error queue, settings);
`ScpiSession` is one client's conversation. However the bytes are split on their way, the replies are the same.
A line that came before is not parsed again: its actions are kept.
"""

from __future__ import annotations

from collections.abc import Callable, Iterable, Sequence
from functools import partial
from typing import NamedTuple

from sim_hardware.scpi_data import Integer
from sim_hardware.scpi_errors import ScpiError
from sim_hardware.scpi_status import OPERATION_COMPLETE, Status
from sim_hardware.scpi_syntax import INPUT_LIMIT, Unit, message_end, split
from sim_hardware.scpi_tree import Command, Path, Tree

Buffer = bytes | memoryview


class Block(NamedTuple):
    """A definite-length block (IEEE 488.2, 8.7.9) as a reply; the payload is not copied."""

    head: bytes
    payload: memoryview

    @classmethod
    def of(cls, payload: memoryview, before: bytes = b"") -> Block:
        """With the shortest length field; `before` is a response header."""
        length = b"%d" % payload.nbytes
        return cls(b"%s#%d%s" % (before, len(length), length), payload.cast("B"))


class Indefinite(bytes):
    """Arbitrary ASCII (IEEE 488.2, 8.7.11): no further query may follow in the same message."""


class Wait(NamedTuple):
    """The reply comes when `done` says so; a None reply only holds up what follows."""

    done: Callable[[], bool]
    reply: bytes | None


Reply = bytes | Block | Wait | None
Action = Callable[[], Reply]
KEPT_LINES, KEPT_LENGTH = 4096, 256


class ScpiInstrument:
    """An instrument that speaks SCPI. A kind of instrument adds its commands and says when it is busy.

    Args:
        identity: reply to `*IDN?`: maker, model, serial number, firmware.
        catch_up: called before each message, so that what is due in simulated time has happened.
    """

    def __init__(self, identity: str, catch_up: Callable[[], object] = lambda: None) -> None:
        self.status = Status()
        self.catch_up = catch_up
        self.output: Sequence[object] = ()
        self._completion_wanted = False
        self._tree = Tree()
        self._programs: dict[bytes, tuple[Action, ...]] = {}
        self.add(self._common(Indefinite(identity.encode("ascii"))))

    def add(self, commands: Iterable[Command]) -> None:
        """Make commands known."""
        for command in commands:
            self._tree.add(command)

    def busy(self) -> bool:
        """Something that was started goes on."""
        return False

    def reset(self) -> None:
        """`*RST`: settings as at power-on."""

    def completed(self) -> None:
        """What was started is over: `*OPC` sets its bit."""
        if self._completion_wanted:
            self._completion_wanted = False
            self.status.events |= OPERATION_COMPLETE

    def program(self, message: bytes) -> tuple[Action, ...]:
        """The actions of one message, with its newline; an error is an action that raises it."""
        known = self._programs.get(message)
        if known is not None:
            return known
        actions: list[Action] = []
        path = self._tree.top
        for unit in split(message[:-1]):
            error, action, path = self._bind(unit, path)
            actions.append(action)
            if error:
                break
        program = tuple(actions)
        if len(message) <= KEPT_LENGTH:
            if len(self._programs) >= KEPT_LINES:
                self._programs.clear()
            self._programs[message] = program
        return program

    def known_program(self, message: bytes) -> tuple[Action, ...] | None:
        """The actions of a message that came before."""
        return self._programs.get(message)

    def _bind(self, unit: Unit | ScpiError, path: Path) -> tuple[bool, Action, Path]:
        try:
            if isinstance(unit, ScpiError):
                raise unit
            command, suffixes, path = self._tree.find(unit, path)
            values = command.values(unit)
        except ScpiError as error:
            return error.is_command_error, partial(_raise, error.number, error.detail), path
        return False, partial(command.call, *suffixes, *values), path

    def _common(self, identity: Indefinite) -> list[Command]:
        status, register = self.status, (Integer(0, 255),)
        return [
            Command("*IDN?", lambda: identity),
            Command("*RST", self._reset),
            Command("*CLS", self._clear),
            Command("*ESE", partial(setattr, status, "event_enable"), register),
            Command("*ESE?", lambda: b"%d" % status.event_enable),
            Command("*ESR?", lambda: b"%d" % status.take_events()),
            Command("*SRE", self._enable_service, register),
            Command("*SRE?", lambda: b"%d" % status.service_enable),
            Command("*STB?", lambda: b"%d" % status.byte(bool(self.output))),
            Command("*OPC", self._want_completion),
            Command("*OPC?", lambda: Wait(self._idle, b"1") if self.busy() else b"1"),
            Command("*WAI", lambda: Wait(self._idle, None) if self.busy() else None),
            Command("*TST?", lambda: b"0"),
            Command("SYSTem:ERRor[:NEXT]?", status.next_error),
            Command("SYSTem:ERRor:COUNt?", lambda: b"%d" % status.error_count()),
            # common practice of instruments on a serial line or socket, no source
            Command("SYSTem:LOCal", lambda: None),
            Command("SYSTem:VERSion?", lambda: b"1999.0"),
        ]

    def _idle(self) -> bool:
        return not self.busy()

    def _reset(self) -> None:
        self._completion_wanted = False
        self.reset()

    def _clear(self) -> None:
        self._completion_wanted = False
        self.status.clear()

    def _enable_service(self, value: int) -> None:
        self.status.service_enable = value & ~0x40  # bit 6 cannot be set (IEEE 488.2, 10.34)

    def _want_completion(self) -> None:
        self._completion_wanted = True
        if not self.busy():
            self.completed()


def _raise(number: int, detail: str) -> Reply:
    raise ScpiError(number, detail)


class ScpiSession:
    """One client's conversation with an instrument."""

    def __init__(self, instrument: ScpiInstrument, terminator: bytes = b"\n") -> None:
        self._instrument = instrument
        self._terminator = terminator
        self._buffer = bytearray()
        self._discarding = False
        self._waiting: Wait | None = None
        self._rest: tuple[Action, ...] = ()
        self._parts: list[bytes | Block] = []

    @property
    def waiting(self) -> bool:
        """A reply is due later: `poll` will give it."""
        return self._waiting is not None

    def feed(self, data: bytes) -> Sequence[Buffer]:
        """Bytes from the client; what is to be sent now."""
        if not self._buffer and self._waiting is None and not self._discarding:
            program = self._instrument.known_program(data)
            if program is not None:
                self._instrument.catch_up()
                out = self._run(program, [])
                return out if self._waiting is None else self._drain()
        self._buffer += data
        return self._drain()

    def poll(self) -> Sequence[Buffer]:
        """What has become ready since; ask after simulated time has gone on."""
        return self._drain() if self._waiting is not None else ()

    def end(self) -> None:
        """The client is gone. A query that it did not finish was never terminated (IEEE 488.2, 6.3.2.2)."""
        if b"?" in self._buffer and not self._discarding:
            self._instrument.status.report(ScpiError(-420))
        self._buffer.clear()
        self._waiting = None

    def _drain(self) -> list[Buffer]:
        out: list[Buffer] = []
        while True:
            self._instrument.catch_up()
            if self._waiting is not None and self._waiting.done():
                out += self._resume()
                continue
            if self._waiting is not None and self._waiting.reply is None:
                return out  # *WAI: messages after it stay in the input buffer
            message = self._next_message()
            if message is None:
                return out
            if self._waiting is not None:  # IEEE 488.2, 6.3.2.3: the reply is dropped
                self._waiting = None
                self._instrument.status.report(ScpiError(-410))
            out += self._run(self._instrument.program(message), [])

    def _next_message(self) -> bytes | None:
        buffer = self._buffer
        while True:
            end = buffer.find(b"\n") if self._discarding else message_end(buffer)
            if end is None or end < 0:
                if self._discarding:
                    buffer.clear()
                if len(buffer) <= INPUT_LIMIT:
                    return None
                self._discard()
            elif self._discarding:
                del buffer[: end + 1]
                self._discarding = False
            elif end >= INPUT_LIMIT:
                self._discard()
            else:
                message = bytes(buffer[: end + 1])
                del buffer[: end + 1]
                return message

    def _discard(self) -> None:
        self._discarding = True
        self._instrument.status.report(ScpiError(-363))

    def _run(self, program: tuple[Action, ...], parts: list[bytes | Block]) -> list[Buffer]:
        status = self._instrument.status
        self._instrument.output = parts
        for index, action in enumerate(program):
            try:
                reply = action()
            except ScpiError as error:
                status.report(error)
                if error.is_command_error:
                    break
                continue
            if reply is None:
                continue
            if isinstance(reply, Wait) and reply.reply is None:
                self._waiting, self._rest, self._parts = reply, program[index + 1 :], parts
                return []
            if parts and isinstance(parts[-1], Indefinite):
                status.report(ScpiError(-440))
                break
            if isinstance(reply, Wait):
                self._waiting, self._rest, self._parts = reply, program[index + 1 :], parts
                return []
            parts.append(reply)
        return self._framed(parts)

    def _resume(self) -> list[Buffer]:
        assert self._waiting is not None
        reply, rest, parts = self._waiting.reply, self._rest, self._parts
        self._waiting = None
        if reply is not None:
            parts.append(reply)
        return self._run(rest, parts)

    def _framed(self, parts: list[bytes | Block]) -> list[Buffer]:
        """One response message: replies separated by semicolons (IEEE 488.2, 8.4.1)."""
        if not parts:
            return []
        if len(parts) == 1 and isinstance(parts[0], bytes):
            return [parts[0] + self._terminator]
        out: list[Buffer] = []
        for index, part in enumerate(parts):
            if index:
                out.append(b";")
            out += part if isinstance(part, Block) else (part,)
        out.append(self._terminator)
        return out
