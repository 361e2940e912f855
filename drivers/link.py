"""One interface to an instrument's bytes, whatever carries them.

A link belongs to one thread. After a timeout the late reply would answer the next question, so the link counts as
out of step: every call is refused until `reconnect`.
"""

from __future__ import annotations

from abc import ABC, abstractmethod
from collections import deque
from collections.abc import Callable, Iterator
from contextlib import contextmanager
from time import monotonic

from drivers.errors import Cancelled, LinkLost, LinkTimeout, ProtocolError
from drivers.framing import Inbox

SLICE_S = 0.05  # how long a wait goes on before it looks whether it was cancelled
TRANSCRIPT_LENGTH = 200
StopAsked = Callable[[], bool]


class Transcript:
    """The last exchanges of a link, for finding faults; blocks are shortened."""

    def __init__(self, length: int = TRANSCRIPT_LENGTH) -> None:
        self._entries: deque[tuple[float, str, bytes]] = deque(maxlen=length)

    def add(self, direction: str, data: bytes) -> None:
        """Note something sent (`>`) or received (`<`)."""
        self._entries.append((monotonic(), direction, data))

    def lines(self) -> list[str]:
        """One line an exchange: seconds before the last one, direction, bytes."""
        if not self._entries:
            return []
        end = self._entries[-1][0]
        return [f"{at - end:9.4f} {direction} {data!r}" for at, direction, data in self._entries]


class Link(ABC):
    """A connection that carries text lines and binary blocks. Subclasses move bytes; the framing is here."""

    def __init__(self, address: str, timeout_s: float = 2.0, terminator: str = "\n") -> None:
        self.address = address
        self.timeout_s = timeout_s
        self.transcript = Transcript()
        self._end = terminator.encode("ascii")
        self._inbox = Inbox()
        self._out_of_step = False
        self._held: list[bytes] | None = None

    # --- what a carrier provides ------------------------------------------------------------------------

    @abstractmethod
    def _connect(self) -> None:
        """Open the carrier; `CannotConnect` with the cure if nothing answers."""

    @abstractmethod
    def _disconnect(self) -> None:
        """Close the carrier; fine when it is closed already."""

    @abstractmethod
    def _send(self, data: bytes) -> None:
        """Send all of it."""

    @abstractmethod
    def _receive(self, timeout_s: float) -> bytes:
        """Some bytes, or none when nothing came in time; `LinkLost` when the peer is gone."""

    def _receive_into(self, buffer: memoryview, timeout_s: float) -> int:
        """Fill the beginning of `buffer`; how many bytes came. A carrier may do it without the copy."""
        data = self._receive(timeout_s)
        fits = min(len(data), len(buffer))
        buffer[:fits] = data[:fits]
        self._inbox.feed(data[fits:])
        return fits

    # --- what the adapters use --------------------------------------------------------------------------

    def open(self) -> None:
        """Connect.

        Raises:
            CannotConnect: nothing answers at the address.
        """
        self._inbox.clear()
        self._out_of_step = False
        self._connect()

    def close(self) -> None:
        """Disconnect; may be called twice."""
        self._disconnect()

    def reconnect(self) -> None:
        """Close and open again, forgetting whatever was under way."""
        self.close()
        self.open()

    def write(self, text: str) -> None:
        """Send a line."""
        self.write_raw(text.encode("ascii") + self._end)

    def write_raw(self, data: bytes) -> None:
        """Send bytes as they are."""
        self._check_in_step()
        self.transcript.add(">", data)
        if self._held is None:
            self._send(data)
        else:
            self._held.append(data)

    @contextmanager
    def together(self) -> Iterator[None]:
        """What is written in this block leaves at once at its end, in order: one packet, one wake-up."""
        self._held = []
        try:
            yield
            held = b"".join(self._held)
        finally:
            self._held = None
        if held:
            self._send(held)

    def query(self, text: str, timeout_s: float | None = None) -> str:
        """Send a line, return the reply line.

        Raises:
            LinkTimeout: no complete reply in time.
            LinkLost: the peer closed the connection.
        """
        self.write(text)
        return self.read_line(timeout_s)

    def read_line(self, timeout_s: float | None = None, cancelled: StopAsked | None = None) -> str:
        """One line without its end.

        Raises:
            LinkTimeout: it did not come in time; `reconnect` before the next question.
            Cancelled: `cancelled` said so; `reconnect` likewise.
        """
        self._check_in_step()
        line = self._inbox.line()
        if line is None:
            deadline = monotonic() + (self.timeout_s if timeout_s is None else timeout_s)
            while line is None:
                self._inbox.feed(self._receive(self._slice(deadline, cancelled)))
                line = self._inbox.line()
        self.transcript.add("<", line.encode())
        return line

    def line_ready(self, wait_s: float) -> bool:
        """Whether a reply line is there, or comes within `wait_s`; unlike a timeout this breaks nothing.

        Raises:
            LinkLost: the peer closed the connection.
        """
        self._check_in_step()
        deadline = monotonic() + wait_s
        while not self._inbox.has_line():
            left = deadline - monotonic()
            self._inbox.feed(self._receive(max(left, 1e-4)))
            if left <= 0:
                return self._inbox.has_line()
        return True

    def read_block(self, timeout_s: float | None = None) -> bytearray:
        """The body of a definite-length block; the end of line after it is taken too.

        Raises:
            ProtocolError: no such block came.
            LinkTimeout, LinkLost: it did not come whole.
        """
        self._check_in_step()
        deadline = monotonic() + (self.timeout_s if timeout_s is None else timeout_s)
        try:
            length = self._inbox.block_length()
            while length is None:
                self._inbox.feed(self._receive(self._slice(deadline, None)))
                length = self._inbox.block_length()
        except BaseException:
            self._out_of_step = True
            raise
        body = bytearray(length)
        first = self._inbox.take(length)
        body[: len(first)] = first
        at = len(first)
        with memoryview(body) as view:
            while at < length:
                at += self._receive_into(view[at:], self._slice(deadline, None))
        rest = self._inbox.line()
        while rest is None:
            self._inbox.feed(self._receive(self._slice(deadline, None)))
            rest = self._inbox.line()
        if rest:
            self._out_of_step = True
            raise ProtocolError(
                f"after a block came {rest[:20]!r} instead of an end of line: it is longer than it says"
            )
        self.transcript.add("<", f"block of {length} bytes".encode())
        return body

    @property
    def in_step(self) -> bool:
        """False after a timeout, until `reconnect`."""
        return not self._out_of_step

    def _check_in_step(self) -> None:
        if self._out_of_step:
            raise LinkTimeout(f"{self.address} is out of step after a reply that did not come; reconnect first")

    def _slice(self, deadline: float, cancelled: StopAsked | None) -> float:
        """How long to wait next; raises when time is up or the wait was cancelled."""
        if cancelled is not None and cancelled():
            self._out_of_step = True
            raise Cancelled(f"waiting for {self.address} was ended")
        left = deadline - monotonic()
        if left <= 0:
            raise self._late()
        return min(left, SLICE_S)

    def _late(self) -> LinkTimeout:
        self._out_of_step = True
        return LinkTimeout(f"{self.address} did not reply in time; is it switched on, and speaking this protocol?")

    def _lost(self, why: str) -> LinkLost:
        self._out_of_step = True
        return LinkLost(f"{self.address}: {why}; check cable and power")
