"""Small servers whose replies a test writes by hand, on TCP and on a pseudo-terminal."""

from __future__ import annotations

import os
import socket
import threading
import tty
from collections.abc import Callable, Iterator
from contextlib import contextmanager
from dataclasses import dataclass, field

Answer = Callable[[bytes], bytes | list[bytes] | None]


@dataclass
class Script:
    """What is answered to each line, and what was heard. A list is sent in pieces; None closes the connection."""

    answers: dict[bytes, bytes | list[bytes] | None] = field(default_factory=dict)
    heard: list[bytes] = field(default_factory=list)
    otherwise: Answer | None = None

    def answer(self, line: bytes) -> bytes | list[bytes] | None:
        """Reply to a line without its end; nothing for what the script does not know."""
        self.heard.append(line)
        if line in self.answers:
            return self.answers[line]
        return self.otherwise(line) if self.otherwise else b""


class Hangup(Exception):
    """The script wants the connection closed."""


def replies(script: Script, buffered: bytearray, send: Callable[[bytes], object]) -> None:
    """Answer every whole line in the buffer; some stages know characters outside lines."""
    while True:
        if b"?" in script.answers and bytes(buffered[:1]) in (b"?", b"!", b"\x18"):
            line = bytes(buffered[:1])
            del buffered[:1]
        else:
            at = buffered.find(b"\n")
            if at < 0:
                return
            line = bytes(buffered[:at]).rstrip(b"\r")
            del buffered[: at + 1]
        answer = script.answer(line)
        if answer is None:
            raise Hangup
        for piece in answer if isinstance(answer, list) else [answer]:
            if piece:
                send(piece)


@contextmanager
def tcp_server(script: Script) -> Iterator[int]:
    """Serve the script on a free port of loopback, one client after another."""
    listener = socket.create_server(("127.0.0.1", 0))
    listener.settimeout(0.05)
    over = threading.Event()

    def serve() -> None:
        while not over.is_set():
            try:
                client, _ = listener.accept()
            except TimeoutError:
                continue
            with client:
                client.settimeout(0.05)
                talk(client)

    def talk(client: socket.socket) -> None:
        buffered = bytearray()
        while not over.is_set():
            try:
                data = client.recv(65536)
            except TimeoutError:
                continue
            except OSError:
                return
            if not data:
                return
            buffered += data
            try:
                replies(script, buffered, client.sendall)
            except (Hangup, OSError):
                return

    thread = threading.Thread(target=serve)
    thread.start()
    try:
        yield listener.getsockname()[1]
    finally:
        over.set()
        thread.join()
        listener.close()


@contextmanager
def terminal_server(script: Script) -> Iterator[str]:
    """Serve the script on a pseudo-terminal; gives the device's name."""
    ours, theirs = os.openpty()
    tty.setraw(theirs)
    os.set_blocking(ours, False)
    over = threading.Event()

    def serve() -> None:
        buffered = bytearray()
        while not over.wait(0.002):
            try:
                buffered += os.read(ours, 65536)
            except BlockingIOError:
                continue
            except OSError:
                return
            try:
                replies(script, buffered, write_all)
            except Hangup:
                return

    def write_all(data: bytes) -> None:
        while data and not over.is_set():
            try:
                data = data[os.write(ours, data) :]
            except BlockingIOError:
                over.wait(0.001)  # the terminal holds some kilobytes

    thread = threading.Thread(target=serve)
    thread.start()
    try:
        yield os.ttyname(theirs)
    finally:
        over.set()
        thread.join()
        os.close(ours)
        os.close(theirs)
