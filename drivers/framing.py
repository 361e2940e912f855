"""Bytes in, lines and blocks out: the framing of replies, without any socket.

A definite-length block (IEEE 488.2, 8.7.9) is `#`, one digit n, n digits that give the length, and so many bytes.
"""

from __future__ import annotations

from drivers.errors import ProtocolError

LONGEST_LINE = 1 << 16


class Inbox:
    """What has arrived and was not yet taken."""

    def __init__(self) -> None:
        self._bytes = bytearray()

    def feed(self, data: bytes | bytearray | memoryview) -> None:
        """Append what arrived."""
        self._bytes += data

    def clear(self) -> None:
        """Forget everything."""
        self._bytes.clear()

    def __len__(self) -> int:
        return len(self._bytes)

    def has_line(self) -> bool:
        """Whether `line` would give one."""
        return b"\n" in self._bytes

    def line(self) -> str | None:
        """Take one line without its end, or None while it is not complete.

        Raises:
            ProtocolError: far too much came without an end of line.
        """
        at = self._bytes.find(b"\n")
        if at < 0:
            if len(self._bytes) > LONGEST_LINE:
                raise ProtocolError(f"{len(self._bytes)} bytes came without an end of line")
            return None
        line = bytes(self._bytes[:at])
        del self._bytes[: at + 1]
        return line.rstrip(b"\r").decode("ascii", "replace")

    def block_length(self) -> int | None:
        """Take the head of a block and give the length of its body, or None while the head is not complete.

        Raises:
            ProtocolError: no definite-length block stands here.
        """
        head = self._bytes
        if not head:
            return None
        if head[:1] != b"#":
            raise ProtocolError(f"a block was expected, but the reply begins with {bytes(head[:20])!r}")
        if len(head) < 2:
            return None
        digits = head[1] - ord("0")
        if digits == 0:
            raise ProtocolError("the instrument sent a block of indefinite length (#0), which has no end on this link")
        if not 1 <= digits <= 9:
            raise ProtocolError(f"a block cannot begin with {bytes(head[:2])!r}")
        if len(head) < 2 + digits:
            return None
        number = bytes(head[2 : 2 + digits])
        if not number.isdigit():
            raise ProtocolError(f"the length of a block is {number!r}, which is no number")
        del self._bytes[: 2 + digits]
        return int(number)

    def take(self, most: int) -> bytes:
        """Take up to `most` bytes."""
        taken = bytes(self._bytes[:most])
        del self._bytes[:most]
        return taken
