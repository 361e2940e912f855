"""A relay between a link and a server that makes the answers late, cuts them off, or puts garbage in their place."""

from __future__ import annotations

import select
import socket
import threading
from collections.abc import Iterator
from contextlib import contextmanager
from dataclasses import dataclass, field

LOOK_S = 0.02


@dataclass(frozen=True)
class Latency:
    """Every piece of an answer is held back so long."""

    seconds: float


@dataclass(frozen=True)
class Cut:
    """So many bytes of the answers still pass, then the connection is closed."""

    after: int


@dataclass(frozen=True)
class Garbage:
    """These bytes come in place of what the instrument sends."""

    bytes_: bytes


Fault = Latency | Cut | Garbage | None


@dataclass
class Relay:
    """Where it listens, and the fault that the answers have now."""

    port: int
    fault: Fault = None
    healed: threading.Event = field(default_factory=threading.Event)

    def break_it(self, fault: Fault) -> None:
        """From now on."""
        self.healed.clear()
        self.fault = fault

    def heal(self) -> None:
        """New answers pass; one that was held back is let go."""
        self.fault = None
        self.healed.set()


class _Hangup(Exception):
    """Close both sides."""


def _passed(relay: Relay, data: bytes, client: socket.socket) -> None:
    fault = relay.fault
    if isinstance(fault, Latency):
        relay.healed.wait(fault.seconds)
    elif isinstance(fault, Garbage):
        data = fault.bytes_
    elif isinstance(fault, Cut):
        client.sendall(data[: fault.after])
        relay.fault = Cut(max(0, fault.after - len(data)))
        if len(data) > fault.after:
            raise _Hangup
        return
    client.sendall(data)


def _carry(relay: Relay, client: socket.socket, server: socket.socket, over: threading.Event) -> None:
    while not over.is_set():
        for ready in select.select([client, server], [], [], LOOK_S)[0]:
            data = ready.recv(65536)
            if not data:
                return
            if ready is client:
                server.sendall(data)
            else:
                _passed(relay, data, client)


@contextmanager
def relay_to(host: str, port: int) -> Iterator[Relay]:
    """Carry the bytes of one client after another to a server on loopback."""
    listener = socket.create_server(("127.0.0.1", 0))
    listener.settimeout(LOOK_S)
    relay = Relay(listener.getsockname()[1])
    over = threading.Event()

    def serve() -> None:
        while not over.is_set():
            try:
                client, _ = listener.accept()
            except TimeoutError:
                continue
            try:
                with client, socket.create_connection((host, port), 5) as server:
                    _carry(relay, client, server, over)
            except (_Hangup, OSError):
                continue

    thread = threading.Thread(target=serve)
    thread.start()
    try:
        yield relay
    finally:
        over.set()
        relay.heal()
        thread.join()
        listener.close()
