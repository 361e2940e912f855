"""A client of the daemon: asks, and follows its events without missing one."""

from __future__ import annotations

from collections.abc import Iterator
from time import monotonic
from types import TracebackType
from typing import Self

import msgspec
import zmq

from acquire.endpoint import events_endpoint
from acquire.messages import (
    Done,
    Event,
    EventEnvelope,
    Events,
    GetEvents,
    GetStatus,
    Refused,
    Reply,
    ReplyEnvelope,
    Request,
    RequestEnvelope,
    Status,
)

REPLY_S = 5.0
LOOK_MS = 500

encode = msgspec.msgpack.Encoder().encode
decode_reply = msgspec.msgpack.Decoder(ReplyEnvelope).decode
decode_event = msgspec.msgpack.Decoder(EventEnvelope).decode


class DaemonSilent(Exception):
    """No daemon answers; one line with the cure."""


class DaemonReplaced(DaemonSilent):
    """Another daemon answers where the one was that ran the scan."""


class RequestRefused(Exception):
    """The daemon refused; one line or more, with the cure."""


class Client:
    """A connection; use it as a context manager."""

    def __init__(self, endpoint: str) -> None:
        self.endpoint = endpoint
        self._context = zmq.Context()
        self._requests = self._socket(zmq.DEALER, endpoint)
        self._events = self._socket(zmq.SUB, events_endpoint(endpoint))
        self._events.setsockopt(zmq.SUBSCRIBE, b"")
        self._next: int | None = None
        self._daemon: str | None = None
        self._asked = 0

    def _socket(self, kind: int, endpoint: str) -> zmq.Socket[bytes]:
        socket = self._context.socket(kind)
        socket.linger = 0
        socket.connect(endpoint)
        return socket

    def __enter__(self) -> Self:
        return self

    def __exit__(self, kind: type[BaseException] | None, error: BaseException | None, at: TracebackType | None) -> None:
        self.close()

    def close(self) -> None:
        """Let go of the sockets."""
        self._requests.close()
        self._events.close()
        self._context.term()

    def ask(self, request: Request, timeout_s: float = REPLY_S) -> Reply:
        """Send a request, return the reply.

        Raises:
            DaemonSilent: nobody answers.
            RequestRefused: the daemon refused.
        """
        self._asked += 1
        self._requests.send_multipart([b"", encode(RequestEnvelope(number=self._asked, body=request))])
        deadline = monotonic() + timeout_s
        reply: Reply | None = None
        while reply is None:
            if not self._requests.poll(max(0, int((deadline - monotonic()) * 1e3))):
                raise DaemonSilent(f"no daemon answers at {self.endpoint}; start one with: truepivot serve BENCH")
            try:
                envelope = decode_reply(self._requests.recv_multipart()[-1])
            except msgspec.MsgspecError as error:
                raise self._stranger() from error
            # the reply to a request whose waiting was broken off answers nothing else
            reply = envelope.body if envelope.number in (0, self._asked) else None
        if isinstance(reply, Refused):
            raise RequestRefused(reply.text)
        return reply

    def do(self, request: Request) -> str:
        """Ask for something that is simply done; returns what the daemon says."""
        reply = self.ask(request)
        return reply.text if isinstance(reply, Done) else ""

    def status(self) -> Status:
        """How things stand."""
        reply = self.ask(GetStatus())
        if not isinstance(reply, Status):
            raise self._stranger()
        self._still(reply.daemon)
        return reply

    def follow_from(self, number: int) -> None:
        """Let `events` begin with that number, also where it was sent before this client came."""
        self._next = number

    def events(self) -> Iterator[Event | None]:
        """Events in order without gaps; None now and then while nothing comes, so that the caller may look around.

        Raises:
            DaemonSilent: the daemon is gone.
        """
        if self._next is None:
            self._next = self.status().last_event + 1
        yield from self._missed()
        while True:
            if not self._events.poll(LOOK_MS):
                if self.status().last_event >= self._next:
                    yield from self._missed()
                yield None
                continue
            try:
                envelope = decode_event(self._events.recv())
            except msgspec.MsgspecError as error:
                raise self._stranger() from error
            self._still(envelope.daemon)
            if envelope.number > self._next:
                yield from self._missed()
            if envelope.number == self._next:
                self._next += 1
                yield envelope.body

    def _missed(self) -> Iterator[Event]:
        """What was sent since the last event that was seen; what the daemon no longer keeps is skipped."""
        while True:
            reply = self.ask(GetEvents(since=self._next or 1))
            if not isinstance(reply, Events) or not reply.events:
                return
            for envelope in reply.events:
                self._still(envelope.daemon)
                if envelope.number >= (self._next or 1):
                    self._next = envelope.number + 1
                    yield envelope.body

    def _stranger(self) -> DaemonSilent:
        return DaemonSilent(f"what answers at {self.endpoint} is no daemon of this version")

    def _still(self, daemon: str) -> None:
        """Whether it is the same daemon as before: another one knows nothing of the scan that is followed.

        Raises:
            DaemonReplaced: it is not.
        """
        if self._daemon not in (None, daemon):
            raise DaemonReplaced(
                f"the daemon at {self.endpoint} was started anew, so its scan is broken off; what was stored stays, "
                "go on with: truepivot run --continue STORE"
            )
        self._daemon = daemon
