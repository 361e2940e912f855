"""What the transport needs of one client's conversation with an instrument."""

from __future__ import annotations

from collections.abc import Sequence
from typing import Protocol


class Conversation(Protocol):
    """Bytes in, bytes out; replies that are due later are asked for with `poll`."""

    @property
    def waiting(self) -> bool:
        """A reply is due later."""
        ...

    def feed(self, data: bytes) -> Sequence[bytes | memoryview]:
        """Bytes from the client; what is to be sent now."""
        ...

    def poll(self) -> Sequence[bytes | memoryview]:
        """What has become ready since simulated time has gone on."""
        ...

    def end(self) -> None:
        """The client is gone."""
        ...
