"""The pipe between daemon and recorder, with a poll that costs one system call."""

from __future__ import annotations

import select
from multiprocessing.connection import Connection


class Channel:
    """A connection whose readiness is asked for thousands of times a second."""

    def __init__(self, connection: Connection) -> None:
        self._connection = connection
        self._poll = select.poll()
        self._poll.register(connection.fileno(), select.POLLIN | select.POLLHUP)
        self.send = connection.send_bytes
        self.receive = connection.recv_bytes

    def ready(self, wait_s: float | None = 0.0) -> bool:
        """Whether something is there or comes in time, an end of the connection included; None: wait for ever."""
        return bool(self._poll.poll(None if wait_s is None else max(0.0, wait_s) * 1e3))

    def close(self) -> None:
        """Close the connection."""
        self._connection.close()
