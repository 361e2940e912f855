"""Simulated thermometer."""

from __future__ import annotations

from collections.abc import Callable

from sim_hardware.scpi import ScpiInstrument
from sim_hardware.scpi_tree import Command


class Thermometer(ScpiInstrument):
    """Answers the water temperature in degrees Celsius, as text that `reading` makes."""

    def __init__(
        self,
        reading: Callable[[], str],
        catch_up: Callable[[], object],
        identity: str = "QUIET BASIN,THERMOMETER,0001,1.0",
    ) -> None:
        super().__init__(identity, catch_up)
        self.add(
            Command(f"{verb}[:TEMPerature]?", lambda: reading().encode("ascii"))
            for verb in ("MEASure", "READ", "FETCh")
        )
