"""What every SCPI instrument has in common: identity, error queue, a known state, a safe end.

Sources: IEEE 488.2 for the common commands and the status byte, SCPI-1999 volume 2, 21.8 for the error queue
(clause numbers from memory).
"""

from __future__ import annotations

import re

from drivers.errors import DriverError, InstrumentError, ProtocolError
from drivers.identity import accepted
from drivers.link import Link
from profiles.instrument import Instrument

MOST_ERRORS = 30  # some instruments report a standing error again and again


class ScpiInstrument:
    """An open link with a profile; adapters of a role build on it."""

    role = "instrument"

    def __init__(self, link: Link, profile: Instrument) -> None:
        self.link = link
        self.profile = profile
        self.identity = ""

    def open(self) -> None:
        """Connect, check the identity, clear the status, set a safe state.

        Raises:
            CannotConnect, WrongIdentity, InstrumentError: one line each, with the cure.
        """
        self.link.open()
        try:
            self.check_identity()
            self.link.write("*CLS")
            self.make_safe()
            self.check_errors("while it was set up")
        except BaseException:
            self.link.close()
            raise

    def close(self) -> None:
        """Leave the instrument safe, its panel free, and close the link; a dead link is no reason to fail."""
        try:
            if not self.link.in_step:
                self.link.reconnect()
            self.make_safe()
            if self.profile.panel is not None:
                self.link.write(self.profile.panel)
        except DriverError:
            self.link.transcript.add("!", b"could not be left in its safe state")
        finally:
            self.link.close()

    def recover(self) -> None:
        """After a link failed: reconnect, prove that it is still the same instrument, clear its status."""
        self.link.reconnect()
        self.check_identity()
        self.link.write("*CLS")

    def make_safe(self) -> None:
        """Put the instrument into the state in which it may be left alone."""

    def check_identity(self) -> None:
        """Ask who is there, and refuse another."""
        self.identity = accepted(self.link.query(self.profile.identify), self.link.address, self.profile)

    def send(self, action: str, **fields: object) -> None:
        """Send a command of the profile."""
        self.link.write(self.profile.commands[action].format(**fields))

    def ask(self, action: str, **fields: object) -> str:
        """Ask a question of the profile."""
        return self.link.query(self.profile.commands[action].format(**fields))

    def ask_number(self, action: str) -> float:
        """Ask for one number.

        Raises:
            ProtocolError: the reply is none.
        """
        reply = self.ask(action)
        try:
            return float(reply)
        except ValueError as error:
            raise ProtocolError(
                f"the {self.role} answered {reply!r} to {self.profile.commands[action]!r}; a number was expected"
            ) from error

    def check_errors(self, when: str) -> None:
        """Read the error queue until it is empty.

        Raises:
            InstrumentError: it was not; the message names the first entry and how many more there were.
        """
        if not self.profile.has_error_queue:
            return
        entries = []
        for _ in range(MOST_ERRORS):
            reply = self.link.query("SYSTem:ERRor?")
            match = re.match(r'\s*([+-]?\d+)\s*,\s*"?(.*?)"?\s*$', reply)
            if not match:
                raise ProtocolError(f"the {self.role} answered {reply!r} to SYSTem:ERRor?")
            if int(match[1]) == 0:
                break
            entries.append((int(match[1]), match[2]))
        if entries:
            code, text = entries[0]
            more = f" and {len(entries) - 1} more" if len(entries) > 1 else ""
            raise InstrumentError(f"the {self.role} reports {code}, {text}{more} {when}", code)
