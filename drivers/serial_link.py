"""A serial line, through pyserial."""

from __future__ import annotations

import os
import select
from typing import Any

from drivers.errors import CannotConnect
from drivers.link import Link

CHUNK = 1 << 16


class SerialLink(Link):
    """`serial:///dev/NAME`. Opening some boards restarts them: what they were doing is then unknown."""

    def __init__(self, address: str, timeout_s: float = 2.0, terminator: str = "\n", baud_rate: int = 115_200) -> None:
        super().__init__(address, timeout_s, terminator)
        self._device = address.removeprefix("serial://")
        self._baud_rate = baud_rate
        self._port: Any = None

    def _connect(self) -> None:
        import serial

        try:
            self._port = serial.Serial(self._device, self._baud_rate, exclusive=True, write_timeout=self.timeout_s)
        except (OSError, ValueError) as error:  # SerialException is an OSError
            raise CannotConnect(
                f"cannot open {self._device} ({error}); is it plugged in, and may this user open it?"
            ) from error
        self._port.reset_input_buffer()
        self._poll = select.poll()
        self._poll.register(self._port.fd, select.POLLIN)

    def _disconnect(self) -> None:
        if self._port is not None:
            self._port.close()
            self._port = None

    def _send(self, data: bytes) -> None:
        port = self._open_port()
        try:
            if len(data) != os.write(port.fd, data):
                port.write(data)  # never seen: so few bytes always fit
        except BlockingIOError:
            port.write(data)
        except OSError as error:
            raise self._lost(f"sending failed ({error})") from error

    def _receive(self, timeout_s: float) -> bytes:
        """One wait and one read on pyserial's own descriptor: half the system calls of its `read`."""
        port = self._open_port()
        try:
            if not self._poll.poll(timeout_s * 1e3):
                return b""
            data = os.read(port.fd, CHUNK)
        except (OSError, TypeError) as error:  # a port that vanished raises either
            raise self._lost(f"the port is gone ({error})") from error
        if not data:
            raise self._lost("the port is gone")
        return data

    def _open_port(self) -> Any:
        if self._port is None:
            raise self._lost("is not connected")
        return self._port
