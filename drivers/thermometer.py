"""The thermometer in the water."""

from __future__ import annotations

from drivers.errors import ProtocolError
from drivers.scpi import ScpiInstrument


class QueryThermometer(ScpiInstrument):
    """One question, one number in degrees Celsius."""

    role = "thermometer"

    def ask_temperature(self) -> None:
        """Send the question; the answer is fetched later, so that a slow instrument holds nothing up."""
        self.send("temperature")

    def answer_ready(self, wait_s: float) -> bool:
        """Whether the reply is there, or comes within `wait_s`."""
        return self.link.line_ready(wait_s)

    def answer(self) -> float:
        """The reply, degrees Celsius.

        Raises:
            ProtocolError: it is no number, or no temperature that liquid water has.
        """
        reply = self.link.read_line()
        try:
            value = float(reply)
        except ValueError as error:
            raise ProtocolError(f"the thermometer answered {reply!r}; a number was expected") from error
        if not 0.0 < value < 100.0:
            raise ProtocolError(f"the thermometer reads {value:g} deg C; is its probe connected?")
        return value
