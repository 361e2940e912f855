from __future__ import annotations

import os
import selectors
import socket
import threading
import tty
from collections.abc import Iterator, Sequence
from contextlib import contextmanager
from pathlib import Path

import pytest

from sim_hardware.clock import Timeline
from sim_hardware.transport import Loop, TcpServer, TerminalLine

LARGE = memoryview(bytes(range(256)) * 40_000)


class Echo:
    """Gives back what it gets; `big` gives a large reply in pieces, `later` one that is due after 50 ms."""

    ended = 0

    def __init__(self, timeline: Timeline) -> None:
        self._timeline = timeline
        self._due: list[float] = []

    @property
    def waiting(self) -> bool:
        return bool(self._due)

    def feed(self, data: bytes) -> Sequence[bytes | memoryview]:
        if data == b"big":
            return [b"<", LARGE, b">"]
        if data == b"later":
            self._due = [self._timeline.now() + 0.05]
            self._timeline.schedule(self._due[0], lambda: None)
            return []
        return [data]

    def poll(self) -> Sequence[bytes | memoryview]:
        if self._due and self._timeline.now() >= self._due[0]:
            self._due = []
            return [b"now"]
        return []

    def end(self) -> None:
        type(self).ended += 1


@contextmanager
def serving(link: Path | None = None) -> Iterator[tuple[str, int]]:
    """A loop in a thread; the address of its TCP server."""
    timeline = Timeline(1.0)
    loop = Loop(timeline)
    server = TcpServer(loop, "127.0.0.1", 0, lambda: Echo(timeline))
    if link is not None:
        TerminalLine(loop, link, Echo(timeline))
    wake, woken = socket.socketpair()

    class Stop:
        def ready(self, events: int) -> None:
            loop.stop()

        def close(self) -> None:
            loop.remove(woken.fileno(), self)
            woken.close()

    loop.add(woken.fileno(), Stop())
    thread = threading.Thread(target=loop.run)
    thread.start()
    try:
        yield server.address
    finally:
        wake.send(b"x")
        thread.join(30)
        loop.close()
        wake.close()
        assert not thread.is_alive()


def connect(address: tuple[str, int]) -> socket.socket:
    client = socket.create_connection(address, timeout=30)
    client.setsockopt(socket.IPPROTO_TCP, socket.TCP_NODELAY, 1)
    return client


def exactly(client: socket.socket, count: int) -> bytes:
    got = bytearray()
    while len(got) < count:
        piece = client.recv(1 << 20)
        assert piece, "closed too early"
        got += piece
    return bytes(got)


def test_several_clients_of_one_port_are_served_side_by_side() -> None:
    with serving() as address, connect(address) as one, connect(address) as two:
        one.sendall(b"from one")
        two.sendall(b"from two")
        assert exactly(two, 8) == b"from two"
        assert exactly(one, 8) == b"from one"


def test_a_large_reply_arrives_whole_though_it_does_not_fit_at_once() -> None:
    with serving() as address, connect(address) as client:
        client.sendall(b"big")
        assert exactly(client, len(LARGE) + 2) == b"<" + bytes(LARGE) + b">"


def test_a_client_that_leaves_in_the_middle_of_a_reply_harms_nobody() -> None:
    Echo.ended = 0
    with serving() as address, connect(address) as stays:
        for _ in range(3):
            leaves = connect(address)
            leaves.sendall(b"big")
            leaves.recv(1000)
            leaves.close()
        stays.sendall(b"still there")
        assert exactly(stays, 11) == b"still there"
    assert Echo.ended == 4


def test_a_client_that_does_not_read_holds_up_no_other() -> None:
    with serving() as address, connect(address) as lazy, connect(address) as brisk:
        lazy.sendall(b"big")
        brisk.sendall(b"hello")
        assert exactly(brisk, 5) == b"hello"
        assert exactly(lazy, len(LARGE) + 2)[-1:] == b">"


def test_a_reply_that_is_due_later_comes_by_itself() -> None:
    with serving() as address, connect(address) as client:
        client.sendall(b"later")
        assert exactly(client, 3) == b"now"


def test_a_terminal_is_raw_and_outlives_its_clients(tmp_path: Path) -> None:
    link = tmp_path / "stage"
    everything = bytes(range(256))
    with serving(link):
        for _ in range(2):
            far = os.open(link, os.O_RDWR | os.O_NOCTTY)
            tty.setraw(far)
            try:
                os.write(far, everything)
                got = b""
                while len(got) < 256:
                    got += os.read(far, 1000)
                assert got == everything
            finally:
                os.close(far)
    assert not link.is_symlink()


def test_a_link_left_behind_is_replaced_and_a_file_is_not(tmp_path: Path) -> None:
    timeline = Timeline(1.0)
    loop = Loop(timeline)
    stale = tmp_path / "stale"
    stale.symlink_to(tmp_path / "gone")
    terminal = TerminalLine(loop, stale, Echo(timeline))
    assert stale.exists()
    terminal.close()
    precious = tmp_path / "precious"
    precious.write_text("mine")
    with pytest.raises(FileExistsError):
        TerminalLine(loop, precious, Echo(timeline))
    assert precious.read_text() == "mine"
    loop.close()


def test_closing_the_loop_closes_what_it_serves() -> None:
    timeline = Timeline(1.0)
    loop = Loop(timeline)
    server = TcpServer(loop, "127.0.0.1", 0, lambda: Echo(timeline))
    address = server.address
    loop.close()
    with pytest.raises(ConnectionRefusedError):
        socket.create_connection(address, timeout=5)
    with selectors.DefaultSelector() as selector:
        assert not selector.get_map()
