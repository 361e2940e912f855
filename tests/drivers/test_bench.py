"""The source is off first and last, however things end."""

from collections.abc import Iterator
from contextlib import ExitStack, contextmanager
from time import monotonic, sleep
from typing import Any

import pytest

from drivers.bench import BenchInstruments, open_instruments
from drivers.errors import CannotConnect, DriverError, InstrumentError, ProtocolError
from drivers.roles import Drive
from profiles.bench import Bench
from profiles.load import load_bench, load_instrument
from tests.drivers.scripted import Script, tcp_server
from tests.drivers.test_stages import IDLE, IsoScript

ERRORS: dict[bytes, Any] = {b"SYSTem:ERRor?": b'0,"No error"\n'}


class GeneratorScript(Script):
    """Follows its output command, unless it sticks."""

    def __init__(self, sticks: bool = False) -> None:
        super().__init__(ERRORS | {b"*IDN?": b"QUIET BASIN,GENERATOR,1,1\n"})
        self.on = True  # somebody left it on
        self.sticks = sticks

    def answer(self, line: bytes) -> bytes | list[bytes] | None:
        if line.startswith(b"OUTPut:STATe ") and not self.sticks:
            self.on = line.endswith(b"1")
        if line == b"OUTPut:STATe?":
            self.heard.append(line)
            return b"1\n" if self.on else b"0\n"
        return super().answer(line)


def driving(generator: GeneratorScript) -> bool:
    """The output is on."""
    return generator.on


@contextmanager
def bench_of(generator: Script, temperature: bytes = b"21.3\n", lost: str = "") -> Iterator[Bench]:
    scripts: dict[str, Script] = {
        "generator": generator,
        "oscilloscope": Script(ERRORS | {b"*IDN?": b"QUIET BASIN,SCOPE-P,1,1\n"}),
        "stage": IsoScript(IDLE),
        "thermometer": Script(
            ERRORS | {b"*IDN?": b"QUIET BASIN,THERMOMETER,1,1\n", b"MEASure:TEMPerature?": temperature}
        ),
    }
    bench = load_bench("demo-tank")
    with ExitStack() as stack:
        attached = {}
        for role, given in bench.instruments.items():
            port = stack.enter_context(tcp_server(scripts[role]))
            attached[role] = given.model_copy(update={"address": f"tcp://127.0.0.1:{1 if role == lost else port}"})
        yield bench.model_copy(update={"instruments": attached})


@contextmanager
def opened(bench: Bench) -> Iterator[BenchInstruments]:
    profiles = {r: load_instrument(a.profile) for r, a in bench.instruments.items()}
    with open_instruments(bench, profiles) as instruments:
        yield instruments


def test_opening_switches_the_source_off_and_so_does_the_end() -> None:
    generator = GeneratorScript()
    with bench_of(generator) as bench:
        with opened(bench) as instruments:
            assert not driving(generator)
            assert set(instruments.identities()) == {"oscilloscope", "stage", "generator", "thermometer"}
            instruments.generator.output(True)
            assert driving(generator)
        assert not driving(generator)


def test_the_panel_is_given_back_last() -> None:
    generator = GeneratorScript()
    with bench_of(generator) as bench:
        with opened(bench):
            assert b"SYSTem:LOCal" not in generator.heard
        deadline = monotonic() + 5
        while b"SYSTem:LOCal" not in generator.heard and monotonic() < deadline:
            sleep(0.01)  # the last word of a connection that is closed already
    assert generator.heard[-1] == b"SYSTem:LOCal"
    assert generator.heard[-2].startswith(b"OUTPut")  # and before that the source is off


def test_an_exception_switches_the_source_off() -> None:
    generator = GeneratorScript()

    def fail(bench: Bench) -> None:
        with opened(bench) as instruments:
            instruments.generator.output(True)
            raise KeyboardInterrupt

    with bench_of(generator) as bench:
        with pytest.raises(KeyboardInterrupt):
            fail(bench)
        assert not driving(generator)


def test_the_source_is_off_also_when_another_instrument_is_not_there() -> None:
    generator = GeneratorScript()
    with bench_of(generator, lost="stage") as bench:
        with pytest.raises(CannotConnect, match="nothing answers"), opened(bench):
            pass
        assert not driving(generator)


def test_an_output_that_does_not_follow_is_not_believed() -> None:
    with (
        bench_of(GeneratorScript(sticks=True)) as bench,
        pytest.raises(InstrumentError, match="'1' after it was switched off: do it by hand"),
        opened(bench),
    ):
        pass


def test_a_source_that_cannot_be_switched_off_at_the_end_is_cried_out() -> None:
    generator = GeneratorScript()

    def stick(bench: Bench) -> None:
        with opened(bench) as instruments:
            instruments.generator.output(True)
            generator.sticks = True

    with bench_of(generator) as bench, pytest.raises(DriverError, match="THE SOURCE COULD NOT BE SWITCHED OFF"):
        stick(bench)


def test_a_burst_is_set_without_touching_the_output() -> None:
    generator = GeneratorScript()
    with bench_of(generator) as bench, opened(bench) as instruments:
        instruments.generator.configure(Drive(2.25e6, 10.0, 12, 2e-3))
        assert not driving(generator)
    for line in (b"SOURce:FREQuency 2250000", b"SOURce:VOLTage 10", b"SOURce:BURSt:NCYCles 12"):
        assert line in generator.heard


@pytest.mark.parametrize(
    ("reply", "words"), [(b"9.9E37\n", "is its probe connected"), (b"warm\n", "a number was expected")]
)
def test_a_temperature_that_cannot_be_is_refused(reply: bytes, words: str) -> None:
    with bench_of(GeneratorScript(), reply) as bench, opened(bench) as instruments:
        assert instruments.thermometer is not None
        instruments.thermometer.ask_temperature()
        with pytest.raises(ProtocolError, match=words):
            instruments.thermometer.answer()
