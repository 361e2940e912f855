"""A VISA resource (USB, GPIB, VXI-11, HiSLIP, sockets) through PyVISA, with pyvisa-py unless another is named.

PyVISA stops a read at every byte that equals the termination character, also inside a binary block, so for a
block the character is switched off and exactly as many bytes are read as the block has.
"""

from __future__ import annotations

import re
import socket
from typing import Any

from drivers.errors import CannotConnect, ProtocolError
from drivers.link import Link

SOCKET_RESOURCE = re.compile(r"^TCPIP\d*::([^:]+)::(\d+)::SOCKET$", re.IGNORECASE)
CONNECT_TIMEOUT_S = 3.0
LONGEST_READ = 1 << 20


class VisaLink(Link):
    """`visa://RESOURCE`, for example `visa://TCPIP0::192.0.2.7::inst0::INSTR`."""

    def __init__(self, address: str, timeout_s: float = 2.0, terminator: str = "\n", library: str = "@py") -> None:
        super().__init__(address, timeout_s, terminator)
        self._resource_name = address.removeprefix("visa://")
        self._library = library
        self._manager: Any = None
        self._resource: Any = None

    def _connect(self) -> None:
        import pyvisa

        self._probe_socket()
        try:
            self._manager = pyvisa.ResourceManager(self._library)
            self._resource = self._manager.open_resource(self._resource_name)
        except (pyvisa.Error, OSError, ValueError) as error:
            raise CannotConnect(f"cannot open {self._resource_name} ({error}); is the name right?") from error
        self._resource.write_termination = None
        self._resource.read_termination = self._end[-1:].decode()

    def _probe_socket(self) -> None:
        """Opening a refused socket resource succeeds and only fails later, so try it first."""
        match = SOCKET_RESOURCE.match(self._resource_name)
        if match:
            try:
                socket.create_connection((match[1], int(match[2])), CONNECT_TIMEOUT_S).close()
            except OSError as error:
                raise CannotConnect(
                    f"nothing answers at {self._resource_name} ({error}); is the instrument on?"
                ) from error

    def _disconnect(self) -> None:
        if self._resource is not None:
            self._resource.close()
            self._resource = None

    def _open_resource(self) -> Any:
        if self._resource is None:
            raise self._lost("is not connected")
        return self._resource

    def _send(self, data: bytes) -> None:
        import pyvisa

        resource = self._open_resource()
        try:
            resource.timeout = self.timeout_s * 1e3
            resource.write_raw(data)
        except (pyvisa.Error, OSError) as error:
            raise self._lost(f"sending failed ({error})") from error

    def _receive(self, timeout_s: float) -> bytes:
        import pyvisa

        resource = self._open_resource()
        try:
            resource.timeout = max(1.0, timeout_s * 1e3)
            data: bytes = resource.read_raw(LONGEST_READ)
        except (pyvisa.VisaIOError, OSError) as error:
            if _is_timeout(error):
                return b""
            raise self._lost(f"receiving failed ({error})") from error
        return data

    def read_block(self, timeout_s: float | None = None) -> bytearray:
        """As in `Link`, by one exact read with the termination character switched off."""
        import pyvisa

        self._check_in_step()
        resource = self._open_resource()
        before = resource.read_termination
        try:
            resource.timeout = (self.timeout_s if timeout_s is None else timeout_s) * 1e3
            resource.read_termination = None
            length = self._inbox.block_length()
            while length is None:
                self._inbox.feed(resource.read_bytes(2 if not len(self._inbox) else 1))
                length = self._inbox.block_length()
            body = bytearray(resource.read_bytes(length, chunk_size=max(length, 1)))
            self._end_of_block(resource)
        except (pyvisa.Error, OSError) as error:
            if _is_timeout(error):
                raise self._late() from error
            raise self._lost(f"a block did not come whole ({error})") from error
        except ProtocolError:
            self._out_of_step = True
            raise
        finally:
            resource.read_termination = before
        self.transcript.add("<", f"block of {length} bytes".encode())
        return body

    def _end_of_block(self, resource: Any) -> None:
        """The end of line, one byte or two."""
        end = bytes(resource.read_bytes(1))
        if end == b"\r":
            end = bytes(resource.read_bytes(1))
        if end != b"\n":
            raise ProtocolError(f"a block ends with {end!r} instead of an end of line: it is longer than it says")


def _is_timeout(error: Exception) -> bool:
    """Whether nothing came in time, and nothing worse."""
    import pyvisa

    return isinstance(error, pyvisa.VisaIOError) and error.error_code == pyvisa.constants.StatusCode.error_timeout
