"""The generator that drives the source. Its output is off unless a scan is capturing."""

from __future__ import annotations

from drivers.errors import InstrumentError, ProtocolError
from drivers.roles import Drive
from drivers.scpi import ScpiInstrument


class BurstGenerator(ScpiInstrument):
    """Tone bursts at a repetition rate; the sync line triggers the oscilloscope."""

    role = "generator"
    _drive: Drive | None = None

    def make_safe(self) -> None:
        """Output off, and read back."""
        self.output(False)

    def configure(self, drive: Drive) -> None:
        """Set the burst; the output stays as it is.

        Raises:
            InstrumentError: the instrument refused a setting.
        """
        self.send("frequency", hertz=drive.frequency_hz)
        self.send("amplitude", volts=drive.amplitude_v)
        self.send("cycles", cycles=drive.cycles)
        self.send("repetition", seconds=drive.repetition_s)
        self.send("burst_mode", on=True)
        self.check_errors("while the burst was set up")
        self._drive = drive

    def recover(self) -> None:
        """As for every instrument; the output is off afterwards and the burst as it was."""
        super().recover()
        self.make_safe()
        if self._drive is not None:
            self.configure(self._drive)

    def output(self, on: bool) -> None:
        """Switch the drive.

        Raises:
            InstrumentError: it did not follow.
            ProtocolError: its reply does not tell.
        """
        self.send("output", on=on)
        state = self.ask("output_state").strip().upper()
        if state not in ("0", "1", "OFF", "ON"):
            raise ProtocolError(f"the generator answered {state!r} when it was asked whether its output is on")
        if (state in ("1", "ON")) != on:
            wanted = "on" if on else "off"
            raise InstrumentError(f"the generator's output is {state!r} after it was switched {wanted}: do it by hand")
