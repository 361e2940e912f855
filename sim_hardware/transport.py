"""The outside of the simulated instruments: TCP servers and pseudo-terminals in one event loop.

One thread does everything: a request is received, answered and sent without being handed on. A client that goes
away harms nobody; several clients of one instrument are served side by side; one that does not read its replies is
not listened to until it does.
"""

from __future__ import annotations

import os
import pty
import selectors
import socket
import tty
from collections.abc import Callable, Sequence
from pathlib import Path
from typing import Protocol

from sim_hardware.clock import Timeline
from sim_hardware.conversation import Conversation

RECEIVE = 65_536
READ = selectors.EVENT_READ
Piece = bytes | memoryview
Ready = list[tuple[selectors.SelectorKey, int]]


class Port(Protocol):
    """Something in the event loop."""

    def ready(self, events: int) -> None:
        """It can be read or written."""
        ...

    def close(self) -> None:
        """Let go of it."""
        ...


class Loop:
    """Waits for clients and for simulated time.

    Args:
        idle: does some work ahead when no client wants anything; False when nothing is left to do.
    """

    def __init__(self, timeline: Timeline, idle: Callable[[], bool] = lambda: False) -> None:
        self._timeline = timeline
        self._idle = idle
        self._selector = selectors.DefaultSelector()
        self._lines: set[Line] = set()
        self._running = False

    def add(self, descriptor: int, port: Port) -> None:
        """Watch for something to read."""
        self._selector.register(descriptor, READ, port)
        if isinstance(port, Line):
            self._lines.add(port)

    def watch(self, descriptor: int, events: int, port: Port) -> None:
        """Change what to watch for."""
        self._selector.modify(descriptor, events, port)

    def remove(self, descriptor: int, port: Port) -> None:
        """Watch no more."""
        self._selector.unregister(descriptor)
        if isinstance(port, Line):
            self._lines.discard(port)

    def stop(self) -> None:
        """`run` returns after the present round."""
        self._running = False

    def run(self) -> None:
        """Until `stop`."""
        self._running = True
        while self._running:
            wait = 0.0 if self._idle() else self._timeline.real_seconds_to_next()
            self._serve(self._selector.select(wait))

    def _serve(self, ready: Ready) -> None:
        for key, events in ready:
            key.data.ready(events)
        self._timeline.run_due()
        for line in [line for line in self._lines if line.conversation.waiting]:
            line.say(line.conversation.poll())

    def close(self) -> None:
        """Close every port that is left."""
        for key in list(self._selector.get_map().values()):
            key.data.close()
        self._selector.close()


class Line:
    """One connection: a descriptor, what is still to be sent, and the conversation on it."""

    def __init__(self, loop: Loop, descriptor: int, conversation: Conversation) -> None:
        self.conversation = conversation
        self._loop = loop
        self._descriptor = descriptor
        self._unsent: list[Piece] = []
        loop.add(descriptor, self)

    def ready(self, events: int) -> None:
        """Read and answer, or send what did not fit."""
        if events & selectors.EVENT_WRITE:
            unsent, self._unsent = self._unsent, []
            self.say(unsent)
            if not self._unsent and self._descriptor >= 0:
                self._loop.watch(self._descriptor, READ, self)
            return
        try:
            data = self._receive()
        except BlockingIOError:
            return
        except OSError:
            data = b""
        if data:
            self.say(self.conversation.feed(data))
        else:
            self.lost()

    def say(self, pieces: Sequence[Piece]) -> None:
        """Send now what fits; keep the rest, and do not listen until it is gone."""
        if not pieces or self._descriptor < 0:
            return
        if self._unsent:
            self._unsent += pieces
            return
        try:
            sent = self._send(pieces)
        except BlockingIOError:
            sent = 0
        except OSError:
            self.lost()
            return
        left = _after(pieces, sent)
        if left:
            self._unsent = left
            self._loop.watch(self._descriptor, selectors.EVENT_WRITE, self)

    def lost(self) -> None:
        """The client is gone."""
        self.close()

    def close(self) -> None:
        """End the conversation."""
        if self._descriptor >= 0:
            self._loop.remove(self._descriptor, self)
            self._descriptor = -1
            self.conversation.end()
            self._release()

    def _receive(self) -> bytes:
        raise NotImplementedError

    def _send(self, pieces: Sequence[Piece]) -> int:
        raise NotImplementedError

    def _release(self) -> None:
        raise NotImplementedError


def _after(pieces: Sequence[Piece], sent: int) -> list[Piece]:
    """What is left when the first `sent` bytes are gone."""
    left: list[Piece] = []
    for piece in pieces:
        if sent >= len(piece):
            sent -= len(piece)
        else:
            left.append(memoryview(piece)[sent:])
            sent = 0
    return left


class TcpLine(Line):
    """One TCP client."""

    def __init__(self, loop: Loop, client: socket.socket, conversation: Conversation) -> None:
        client.setblocking(False)
        client.setsockopt(socket.IPPROTO_TCP, socket.TCP_NODELAY, 1)
        self._socket = client
        super().__init__(loop, client.fileno(), conversation)

    def _receive(self) -> bytes:
        return self._socket.recv(RECEIVE)

    def _send(self, pieces: Sequence[Piece]) -> int:
        if len(pieces) == 1:
            return self._socket.send(pieces[0])
        return self._socket.sendmsg(pieces)

    def _release(self) -> None:
        self._socket.close()


class TcpServer:
    """Listens for clients of one instrument; each gets a conversation of its own. Raises OSError if it cannot."""

    def __init__(self, loop: Loop, host: str, port: int, converse: Callable[[], Conversation]) -> None:
        self._loop = loop
        self._converse = converse
        self._socket = socket.create_server((host, port))
        self._socket.setblocking(False)
        loop.add(self._socket.fileno(), self)

    @property
    def address(self) -> tuple[str, int]:
        """Host and port."""
        host, port = self._socket.getsockname()[:2]
        return host, port

    def ready(self, events: int) -> None:  # noqa: ARG002 - one kind of event only
        """A client has come."""
        try:
            client, _ = self._socket.accept()
        except OSError:
            return
        TcpLine(self._loop, client, self._converse())

    def close(self) -> None:
        """Listen no more."""
        self._loop.remove(self._socket.fileno(), self)
        self._socket.close()


class TerminalLine(Line):
    """A pseudo-terminal in raw mode, with a symbolic link at a path of one's choice.

    The far side is kept open here too, so that a client may come and go. Raises OSError if no link can be made.
    """

    def __init__(self, loop: Loop, link: Path, conversation: Conversation) -> None:
        near, self._far = pty.openpty()
        tty.setraw(self._far)
        os.set_blocking(near, False)
        self._link = link
        try:
            if link.is_symlink() and not link.exists():
                link.unlink()  # left behind by a simulator that was killed
            link.symlink_to(os.ttyname(self._far))
        except OSError:
            os.close(near)
            os.close(self._far)
            raise
        self._near = near
        super().__init__(loop, near, conversation)

    def lost(self) -> None:
        """A terminal does not end: what could not be sent is dropped."""

    def _receive(self) -> bytes:
        return os.read(self._near, RECEIVE)

    def _send(self, pieces: Sequence[Piece]) -> int:
        return os.write(self._near, pieces[0] if len(pieces) == 1 else b"".join(pieces))

    def _release(self) -> None:
        self._link.unlink(missing_ok=True)
        os.close(self._near)
        os.close(self._far)
