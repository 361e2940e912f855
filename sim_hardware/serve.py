"""Opens the addresses of a bench and serves its instruments until it is told to stop."""

from __future__ import annotations

import os
import re
import signal
import socket
from collections.abc import Mapping
from pathlib import Path
from types import FrameType

from profiles.bench import Bench
from profiles.instrument import Role
from sim_hardware.bench import BenchError, Converse
from sim_hardware.transport import Loop, TcpServer, TerminalLine

TCP = re.compile(r"tcp://([^:/]+):(\d{1,5})")
SERIAL = re.compile(r"serial://(/[^?]+)")
LOOPBACK = "127.0.0.1"


def open_addresses(
    loop: Loop, bench: Bench, converse: Mapping[Role, Converse], free_folder: Path | None
) -> dict[Role, str]:
    """Listen at each address of the bench; returns the addresses.

    Args:
        loop: what serves them.
        bench: with the addresses.
        converse: begins a conversation with the instrument of a role.
        free_folder: when given, free ports are taken instead, and links to pseudo-terminals are made in it.

    Raises:
        BenchError: an address cannot be taken.
    """
    taken: dict[Role, str] = {}
    for role, attached in bench.instruments.items():
        try:
            taken[role] = _open(loop, role, attached.address, converse[role], free_folder)
        except (OSError, OverflowError) as exc:
            reason = exc.strerror if isinstance(exc, OSError) and exc.strerror else exc
            raise BenchError(f"instruments.{role}: {attached.address} cannot be taken: {reason}") from exc
    return taken


def _open(loop: Loop, role: Role, address: str, converse: Converse, free_folder: Path | None) -> str:
    tcp, serial = TCP.fullmatch(address), SERIAL.fullmatch(address)
    if serial is not None:
        link = free_folder / role if free_folder else Path(serial.group(1))
        TerminalLine(loop, link, converse())
        return f"serial://{link}"
    if free_folder is not None:
        host, port = TcpServer(loop, LOOPBACK, 0, converse).address
    elif tcp is not None:
        host, port = TcpServer(loop, tcp.group(1), int(tcp.group(2)), converse).address
    else:
        raise BenchError(f"instruments.{role}: {address} cannot be simulated; allowed: tcp://HOST:PORT, serial:///PATH")
    return f"tcp://{host}:{port}"


class EndOfInput:
    """Stops the loop when standard input ends: the parent is gone."""

    def __init__(self, loop: Loop, descriptor: int) -> None:
        self._loop, self._descriptor = loop, descriptor
        try:
            loop.add(descriptor, self)
        except OSError as exc:
            raise BenchError("--with-parent: standard input must be a pipe or a terminal") from exc

    def ready(self, events: int) -> None:  # noqa: ARG002 - one kind of event only
        """Anything but the end is of no interest."""
        try:
            ended = os.read(self._descriptor, 4096) == b""
        except OSError:
            ended = True
        if ended:
            self._loop.stop()

    def close(self) -> None:
        """Standard input is not ours to close."""
        self._loop.remove(self._descriptor, self)


class Signals:
    """Stops the loop on SIGTERM and SIGINT."""

    def __init__(self, loop: Loop) -> None:
        self._loop = loop
        self._near, self._far = socket.socketpair()
        self._near.setblocking(False)
        self._far.setblocking(False)
        loop.add(self._near.fileno(), self)
        signal.set_wakeup_fd(self._far.fileno())
        for number in (signal.SIGTERM, signal.SIGINT):
            signal.signal(number, _noted)

    def ready(self, events: int) -> None:  # noqa: ARG002 - one kind of event only
        """A signal has come."""
        self._near.recv(64)
        self._loop.stop()

    def close(self) -> None:
        """Signals that come now find the process at its end."""
        self._loop.remove(self._near.fileno(), self)
        signal.set_wakeup_fd(-1)
        self._near.close()
        self._far.close()


def _noted(number: int, frame: FrameType | None) -> None:
    """The byte on the wake-up descriptor is what matters."""
