"""Past events of the daemon, for clients that missed some or came late."""

from __future__ import annotations

from collections import deque
from itertools import islice

from msgspec import Raw

from acquire.messages import Event, FindingChanged, Notice, ScanStarted, StateChanged

RECENT = 5_000
NOTICES = 100


class History:
    """The last events whole; of older ones what a late client still needs, so that no standing finding is lost.

    Kept of the scan in hand however long ago: its start, its state, the last word of every finding, the last notices.
    """

    def __init__(self) -> None:
        self.newest = 0
        self._recent: deque[tuple[int, bytes]] = deque(maxlen=RECENT)
        self._lasting: dict[str, tuple[int, bytes]] = {}
        self._notices: deque[tuple[int, bytes]] = deque(maxlen=NOTICES)

    @property
    def oldest(self) -> int:
        """The number from which on every event is kept."""
        return self._recent[0][0] if self._recent else self.newest + 1

    def add(self, event: Event | Raw, data: bytes) -> None:
        """Keep an event that gets the next number; `data` is what was sent. `Raw` ones concern a point."""
        self.newest += 1
        entry = (self.newest, data)
        self._recent.append(entry)
        match event:
            case ScanStarted():
                state = self._lasting.get("state")
                self._lasting = {"start": entry} | ({"state": state} if state else {})
            case StateChanged():
                self._lasting["state"] = entry
            case FindingChanged():
                self._lasting[f"finding {event.finding['code']}"] = entry
            case Notice():
                self._notices.append(entry)

    def since(self, number: int, most: int) -> list[bytes]:
        """Events from `number` on, in order, at most so many."""
        older = sorted(entry for entry in (*self._lasting.values(), *self._notices) if entry[0] < self.oldest)
        kept = (data for n, data in (*older, *self._recent) if n >= number)
        return list(islice(kept, most))
