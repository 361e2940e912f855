"""Errors of the drivers.

DriverError
├── LinkError              the connection
│   ├── CannotConnect      nothing answers at the address
│   ├── LinkLost           the peer closed or vanished
│   └── LinkTimeout        no reply in time; the link is out of step until reconnected
├── ProtocolError          the peer sent what it must not
├── InstrumentError        the instrument reported an error of its own
├── InstrumentTimeout      the instrument answers, but does not get done
├── WrongIdentity          another instrument answers at this address
├── OutOfLimits            a move that would leave the travel; nothing was sent
└── Cancelled              the operator asked to stop while waiting
"""

from __future__ import annotations


class DriverError(Exception):
    """Root of everything the drivers raise; the message is one line for the user, with the cure."""


class LinkError(DriverError):
    """The connection failed."""


class CannotConnect(LinkError):
    """Nothing answers at the address."""


class LinkLost(LinkError):
    """The peer closed the connection or the port vanished."""


class LinkTimeout(LinkError):
    """No reply in time: what arrives later would answer the wrong question, so reconnect."""


class ProtocolError(DriverError):
    """The peer sent bytes that the protocol does not allow."""


class InstrumentError(DriverError):
    """The instrument put an error on its queue or answered with one."""

    def __init__(self, message: str, code: int | None = None) -> None:
        super().__init__(message)
        self.code = code


class InstrumentTimeout(DriverError):
    """The instrument answers, but what was started does not complete."""


class WrongIdentity(DriverError):
    """The identity does not match the profile."""


class OutOfLimits(DriverError):
    """The target lies outside the travel."""


class Cancelled(DriverError):
    """A wait was ended by the operator."""
