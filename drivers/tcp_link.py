"""A plain TCP socket, as instruments offer for SCPI. Large blocks go straight into their buffer."""

from __future__ import annotations

import socket
import struct
from urllib.parse import urlsplit

from drivers.errors import CannotConnect
from drivers.link import Link

CONNECT_TIMEOUT_S = 3.0
CHUNK = 1 << 16


class TcpLink(Link):
    """`tcp://HOST:PORT`."""

    def __init__(self, address: str, timeout_s: float = 2.0, terminator: str = "\n") -> None:
        super().__init__(address, timeout_s, terminator)
        parts = urlsplit(address)
        self._where = (parts.hostname or "", parts.port or 0)
        self._socket: socket.socket | None = None
        self._timeout_s = -1.0

    def _connect(self) -> None:
        try:
            self._socket = socket.create_connection(self._where, CONNECT_TIMEOUT_S)
            self._socket.settimeout(None)
            send_limit = struct.pack("@ll", *divmod(int(self.timeout_s * 1e6), 1_000_000))
            self._socket.setsockopt(socket.SOL_SOCKET, socket.SO_SNDTIMEO, send_limit)
        except OSError as error:
            why = error.strerror or str(error)
            raise CannotConnect(
                f"nothing answers at {self.address} ({why.lower()}); is the instrument on, and the address right?"
            ) from error
        self._socket.setsockopt(socket.IPPROTO_TCP, socket.TCP_NODELAY, 1)
        self._timeout_s = -1.0

    def _disconnect(self) -> None:
        if self._socket is not None:
            self._socket.close()
            self._socket = None

    def _open_socket(self) -> socket.socket:
        if self._socket is None:
            raise self._lost("is not connected")
        return self._socket

    def _send(self, data: bytes) -> None:
        connection = self._open_socket()
        try:
            connection.sendall(data)
        except OSError as error:
            raise self._lost(f"sending failed ({error})") from error

    def _wait_at_most(self, connection: socket.socket, timeout_s: float) -> None:
        """Let the kernel time the wait: Python's own timeouts cost a system call for every read."""
        timeout_s = max(timeout_s, 1e-4)
        if abs(timeout_s - self._timeout_s) > 0.1 * timeout_s:
            whole = int(timeout_s)
            value = struct.pack("@ll", whole, int((timeout_s - whole) * 1e6))
            connection.setsockopt(socket.SOL_SOCKET, socket.SO_RCVTIMEO, value)
            self._timeout_s = timeout_s

    def _receive(self, timeout_s: float) -> bytes:
        connection = self._open_socket()
        try:
            self._wait_at_most(connection, timeout_s)
            data = connection.recv(CHUNK)
        except (TimeoutError, BlockingIOError):
            return b""
        except OSError as error:
            raise self._lost(f"receiving failed ({error})") from error
        if not data:
            raise self._lost("the instrument closed the connection")
        return data

    def _receive_into(self, buffer: memoryview, timeout_s: float) -> int:
        connection = self._open_socket()
        try:
            self._wait_at_most(connection, timeout_s)
            count = connection.recv_into(buffer)
        except (TimeoutError, BlockingIOError):
            return 0
        except OSError as error:
            raise self._lost(f"receiving failed ({error})") from error
        if not count:
            raise self._lost("the instrument closed the connection in the middle of a block")
        return count
