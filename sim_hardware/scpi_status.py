"""IEEE 488.2 status reporting: event register, status byte, enable registers and the SCPI error queue."""

from __future__ import annotations

from collections import deque

from sim_hardware.scpi_errors import ScpiError

OPERATION_COMPLETE, QUERY_ERROR, DEVICE_ERROR = 1, 4, 8
EXECUTION_ERROR, COMMAND_ERROR, POWER_ON = 16, 32, 128
ERROR_AVAILABLE, MESSAGE_AVAILABLE, EVENT_SUMMARY, MASTER_SUMMARY = 4, 16, 32, 64
QUEUE_LENGTH = 30


def event_bit(number: int) -> int:
    """The bit of the standard event register for an error number (SCPI-1999 volume 2, 21.8.2)."""
    if -199 <= number <= -100:
        return COMMAND_ERROR
    if -299 <= number <= -200:
        return EXECUTION_ERROR
    if -499 <= number <= -400:
        return QUERY_ERROR
    return DEVICE_ERROR


class Status:
    """The registers of one instrument; shared by all who talk to it."""

    def __init__(self) -> None:
        self.events = POWER_ON
        self.event_enable = 0
        self.service_enable = 0
        self._errors: deque[ScpiError] = deque()

    def report(self, error: ScpiError) -> None:
        """Queue an error; when the queue is full its last entry becomes -350 (SCPI-1999 volume 2, 21.8.1)."""
        self.events |= event_bit(error.number)
        if len(self._errors) < QUEUE_LENGTH:
            self._errors.append(error)
        else:
            self.events |= DEVICE_ERROR
            self._errors[-1] = ScpiError(-350)

    def next_error(self) -> bytes:
        """Oldest entry, taken off the queue."""
        return self._errors.popleft().entry() if self._errors else ScpiError(0).entry()

    def error_count(self) -> int:
        """Entries waiting."""
        return len(self._errors)

    def take_events(self) -> int:
        """The standard event register; reading clears it."""
        events, self.events = self.events, 0
        return events

    def byte(self, message_available: bool) -> int:
        """The status byte with the master summary in bit 6, as `*STB?` reads it (IEEE 488.2, 11.2)."""
        value = ERROR_AVAILABLE if self._errors else 0
        if message_available:
            value |= MESSAGE_AVAILABLE
        if self.events & self.event_enable:
            value |= EVENT_SUMMARY
        if value & self.service_enable:
            value |= MASTER_SUMMARY
        return value

    def clear(self) -> None:
        """`*CLS`: events and errors, not the enable registers."""
        self.events = 0
        self._errors.clear()
