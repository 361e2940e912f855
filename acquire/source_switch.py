"""The switch of the source: what is known of it, and that it ends off."""

from __future__ import annotations

from collections.abc import Callable
from time import sleep

from drivers.errors import DriverError
from drivers.generator import BurstGenerator

TRIES, PAUSE_S = 4, 1.0


class SourceSwitch:
    """Switches the source by its generator; believes it off only when the generator has said so."""

    def __init__(self, generator: BurstGenerator) -> None:
        self._generator = generator
        self._on: bool | None = False  # None: a switch may have worked and its reply been lost

    @property
    def may_be_on(self) -> bool:
        """Whether it is on, or that is not certain."""
        return self._on is not False

    def turn(self, on: bool) -> None:
        """Switch it where it is not known to stand so; over a new connection where the old one is out of step.

        Raises:
            DriverError: it cannot be told how the source stands now.
        """
        if self._on is on:
            return
        self._on = None
        if not self._generator.link.in_step:
            self._generator.recover()
        self._generator.output(on)
        self._on = on

    def make_sure_it_is_off(self, tell: Callable[[str], None]) -> None:
        """Whatever happened before: an instrument that does not answer is asked again over a new connection.

        Raises:
            DriverError: it could not be switched off by any means here.
        """
        for attempt in range(TRIES):
            try:
                self.turn(False)
            except DriverError as error:
                failure = error
                tell(f"the source does not go off ({error}); trying again")
                sleep(attempt * PAUSE_S)
            else:
                return
        raise DriverError(f"THE SOURCE COULD NOT BE SWITCHED OFF, do it by hand now ({failure})")
