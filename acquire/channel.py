"""The pipe between daemon and recorder: frames, many of them to a system call."""

from __future__ import annotations

import select
import socket
import struct
from collections import deque
from time import monotonic

LENGTH = struct.Struct("<I")  # stands before each frame
READ_BYTES = 256 << 10
IN = select.POLLIN | select.POLLHUP
ROOM_BYTES = 208 << 10  # asked of the system for frames on their way; Linux grants it to everybody, and doubles it


class Channel:
    """A connection over which thousands of frames a second pass.

    `send` may wait for the other side; `tell` never does. Were both sides to wait, neither would go on.
    """

    def __init__(self, end: socket.socket) -> None:
        self._end = end
        self._in, self._out, self._both = select.poll(), select.poll(), select.poll()
        self._in.register(end.fileno(), IN)
        self._out.register(end.fileno(), select.POLLOUT)
        self._both.register(end.fileno(), IN | select.POLLOUT)
        self._waiting: deque[bytes] = deque()
        self._deaf = False
        self._come: deque[bytes] = deque()
        self._rest = b""

    def send(self, frame: bytes) -> None:
        """Send a frame; waits while the other side has no room.

        Raises:
            OSError: the other side is gone.
        """
        self._end.sendall(LENGTH.pack(len(frame)) + frame)

    def receive(self) -> bytes:
        """The next frame; waits for it.

        Raises:
            EOFError: the other side is gone, and all that it sent has been received.
        """
        while not self._come:
            try:
                read = self._end.recv(READ_BYTES)
            except ConnectionError as error:
                raise EOFError from error
            if not read:
                raise EOFError
            self._split(self._rest + read)
        return self._come.popleft()

    def _split(self, read: bytes) -> None:
        at = 0
        while len(read) >= at + LENGTH.size:
            stop = at + LENGTH.size + LENGTH.unpack_from(read, at)[0]
            if stop > len(read):
                break
            self._come.append(read[at + LENGTH.size : stop])
            at = stop
        self._rest = read[at:]

    def ready(self, wait_s: float | None = 0.0) -> bool:
        """Whether something is there or comes in time, an end of the connection included; None: wait for ever."""
        if self._come:
            return True
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
        self._end.close()


def channel_pair() -> tuple[Channel, socket.socket]:
    """Our end, and the one to pass to another process."""
    ours, theirs = socket.socketpair()
    ours.setsockopt(socket.SOL_SOCKET, socket.SO_SNDBUF, ROOM_BYTES)
    return Channel(ours), theirs
