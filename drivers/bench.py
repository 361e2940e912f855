"""All instruments of a bench, opened together and left safe together."""

from __future__ import annotations

from collections.abc import Callable, Iterator, Mapping
from contextlib import ExitStack, contextmanager
from dataclasses import dataclass

from drivers.connect import link_to
from drivers.errors import DriverError
from drivers.generator import BurstGenerator
from drivers.link import Link
from drivers.scope import CurveScope, PreambleScope, ScpiScope
from drivers.stage import MotionStage
from drivers.stage_iso import IsoStage
from drivers.stage_prefix import PrefixStage
from drivers.thermometer import QueryThermometer
from profiles.bench import Attached, Bench
from profiles.instrument import Instrument, Role

SCOPES: dict[str, type[ScpiScope]] = {"preamble": PreambleScope, "curve": CurveScope}
STAGES: dict[str, type[MotionStage]] = {"iso-words": IsoStage, "axis-prefix": PrefixStage}
LinkMaker = Callable[[Attached, Instrument], Link]


@dataclass(frozen=True)
class BenchInstruments:
    """The instruments of a bench, open."""

    scope: ScpiScope
    stage: MotionStage
    generator: BurstGenerator
    thermometer: QueryThermometer | None

    def identities(self) -> dict[str, str]:
        """What each instrument said it is."""
        found = {
            "oscilloscope": self.scope.identity,
            "stage": self.stage.identity,
            "generator": self.generator.identity,
        }
        return found | ({"thermometer": self.thermometer.identity} if self.thermometer else {})


@contextmanager
def open_instruments(
    bench: Bench, profiles: Mapping[Role, Instrument], make_link: LinkMaker = link_to
) -> Iterator[BenchInstruments]:
    """Open every instrument; the generator first, because opening it switches the source off.

    However the block ends, the source is switched off before anything else is closed.

    Raises:
        CannotConnect, WrongIdentity, InstrumentError: one line, with the cure; what was open is closed again.
    """
    with ExitStack() as stack:
        attached = bench.instruments

        def link(role: Role) -> Link:
            return make_link(attached[role], profiles[role])

        generator = BurstGenerator(link("generator"), profiles["generator"])
        scope_type, stage_type = SCOPES[profiles["oscilloscope"].family], STAGES[profiles["stage"].family]
        scope = scope_type(link("oscilloscope"), profiles["oscilloscope"], attached["oscilloscope"])
        stage = stage_type(link("stage"), profiles["stage"], bench.axes)
        thermometer = None
        if "thermometer" in attached:
            thermometer = QueryThermometer(link("thermometer"), profiles["thermometer"])

        generator.open()
        stack.callback(generator.close)  # last, so that the source can be switched off until then
        for instrument in (scope, stage, thermometer):
            if instrument is not None:
                instrument.open()
                stack.callback(instrument.close)
        stack.callback(_switch_off, generator)
        yield BenchInstruments(scope, stage, generator, thermometer)


def _switch_off(generator: BurstGenerator) -> None:
    """Source off before the rest is closed; if the link is out of step, a new one is made for it."""
    try:
        if generator.link.in_step:
            generator.make_safe()
        else:
            generator.recover()
    except DriverError as error:
        raise DriverError(f"THE SOURCE COULD NOT BE SWITCHED OFF, do it by hand now ({error})") from error
