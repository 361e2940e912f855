"""The pipe between daemon and recorder, with a poll that costs one system call."""

from __future__ import annotations

import select
import socket
from collections import deque
from multiprocessing.connection import Connection
from time import monotonic

IN = select.POLLIN | select.POLLHUP
ROOM_BYTES = 208 << 10  # asked of the system for frames on their way; Linux grants it to everybody, and doubles it


class Channel:
    """A connection whose readiness is asked for thousands of times a second.

    `send` may wait for the other side; `tell` never does. Were both sides to wait, neither would go on.
    """

    def __init__(self, connection: Connection) -> None:
        self._connection = connection
        self._in, self._out, self._both = select.poll(), select.poll(), select.poll()
        self._in.register(connection.fileno(), IN)
        self._out.register(connection.fileno(), select.POLLOUT)
        self._both.register(connection.fileno(), IN | select.POLLOUT)
        self._waiting: deque[bytes] = deque()
        self._deaf = False
        self.send = connection.send_bytes
        self.receive = connection.recv_bytes

    def ready(self, wait_s: float | None = 0.0) -> bool:
        """Whether something is there or comes in time, an end of the connection included; None: wait for ever."""
        if not self._waiting:
            return bool(self._in.poll(None if wait_s is None else max(0.0, wait_s) * 1e3))
        until = None if wait_s is None else monotonic() + wait_s
        while self._waiting:
            left = None if until is None else max(0.0, until - monotonic()) * 1e3
            found = self._both.poll(left)
            if not found or found[0][1] & ~select.POLLOUT:
                return bool(found)
            self._push()
        return self.ready(None if until is None else until - monotonic())

    def tell(self, frame: bytes) -> None:
        """Send when the other side has room, in order; a side that is gone is told nothing more."""
        if not self._deaf:
            self._waiting.append(frame)
            self._push()

    def flush(self) -> None:
        """Send what is left of `tell`, waiting for the other side."""
        try:
            while self._waiting:
                self.send(self._waiting.popleft())
        except OSError:
            self._give_up()

    def _push(self) -> None:
        try:
            while self._waiting and self._out.poll(0):
                self.send(self._waiting.popleft())
        except OSError:
            self._give_up()

    def _give_up(self) -> None:
        self._deaf = True
        self._waiting.clear()

    def close(self) -> None:
        """Close the connection."""
        self._connection.close()


def channel_pair() -> tuple[Channel, Connection]:
    """Our end, and the one to pass to another process."""
    ours, theirs = socket.socketpair()
    ours.setsockopt(socket.SOL_SOCKET, socket.SO_SNDBUF, ROOM_BYTES)
    return Channel(Connection(ours.detach())), Connection(theirs.detach())
