"""What an operator may ask of a running scan, shared between the thread that listens and the one that scans."""

from __future__ import annotations

from threading import Event


class Control:
    """Flags; set by one thread, looked at by the other."""

    def __init__(self) -> None:
        self._stop = Event()
        self._hold = Event()
        self._go = Event()
        self.reason = ""

    def reset(self) -> None:
        """For a new scan."""
        for flag in (self._stop, self._hold, self._go):
            flag.clear()
        self.reason = ""

    def ask_stop(self, reason: str) -> None:
        """Break the scan off; waits end at once."""
        self.reason = reason
        self._stop.set()
        self._go.set()

    def ask_hold(self, reason: str) -> None:
        """Wait after the point in hand."""
        self.reason = reason
        self._go.clear()
        self._hold.set()

    def ask_resume(self) -> None:
        """Go on."""
        self._hold.clear()
        self._go.set()

    def stop_asked(self) -> bool:
        """For waits that can be ended."""
        return self._stop.is_set()

    def wait_for_stop(self, timeout_s: float) -> bool:
        """Let some time pass; True at once when the scan is to be broken off."""
        return self._stop.wait(timeout_s)

    def hold_asked(self) -> bool:
        """Looked at after every point."""
        return self._hold.is_set()

    def wait_to_go(self, timeout_s: float) -> bool:
        """Whether it was resumed or stopped."""
        return self._go.wait(timeout_s)
