"""Simulated generator: tone bursts, an output that is off at power-on, and a sync pulse with every burst."""

from __future__ import annotations

from functools import partial

from sim_hardware.capture import DriveState
from sim_hardware.clock import Timeline
from sim_hardware.scpi import ScpiInstrument
from sim_hardware.scpi_data import Boolean, Integer, Real, nr3
from sim_hardware.scpi_errors import ScpiError
from sim_hardware.scpi_tree import Command
from sim_hardware.sync import SyncLine

FREQUENCY = Real(1e3, 100e6, "HZ")
VOLTAGE = Real(1e-3, 500.0, "VPP", "V")
CYCLES = Integer(1, 100_000)
PERIOD = Real(1e-6, 100.0, "S")


class BurstGenerator(ScpiInstrument):
    """Drives the source while output and burst mode are on; it has no continuous output."""

    def __init__(self, timeline: Timeline, sync: SyncLine, identity: str = "QUIET BASIN,GENERATOR,0001,1.0") -> None:
        super().__init__(identity, timeline.run_due)
        self._timeline = timeline
        self._sync = sync
        self._defaults()
        self.add(self._commands())

    def _defaults(self) -> None:
        self._hertz, self._volts, self._cycles, self._period_s = 1e6, 0.1, 1, 1e-3
        self._burst = self._on = False

    def reset(self) -> None:
        """Output off."""
        self._defaults()
        self._changed()

    def drive(self) -> DriveState:
        """What the source gets now."""
        return DriveState(self._driving(), self._hertz, self._volts, self._cycles, self._period_s)

    def _driving(self) -> bool:
        return self._on and self._burst

    def _commands(self) -> list[Command]:
        def setting(pattern: str, name: str, param: Real | Boolean) -> list[Command]:
            def ask() -> bytes:
                value = getattr(self, name)
                return nr3(value) if isinstance(value, float) else b"%d" % value

            return [Command(pattern, partial(self._set, name), (param,)), Command(f"{pattern}?", ask)]

        return [
            *setting("[SOURce]:FREQuency", "_hertz", FREQUENCY),
            *setting("[SOURce]:VOLTage", "_volts", VOLTAGE),
            *setting("[SOURce]:BURSt:NCYCles", "_cycles", CYCLES),
            *setting("[SOURce]:BURSt:INTernal:PERiod", "_period_s", PERIOD),
            *setting("[SOURce]:BURSt:STATe", "_burst", Boolean()),
            *setting("OUTPut[:STATe]", "_on", Boolean()),
        ]

    def _set(self, name: str, value: float | bool) -> None:
        before = getattr(self, name)
        if value == before:
            return
        setattr(self, name, value)
        if self._driving() and self._cycles / self._hertz > self._period_s:
            setattr(self, name, before)
            raise ScpiError(-221, "burst longer than its period")
        self._changed()

    def _changed(self) -> None:
        self._sync.set(self._timeline.now(), self._period_s if self._driving() else None)
