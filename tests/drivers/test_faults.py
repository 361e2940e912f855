"""Instruments that are slow, cut off in the middle of an answer, or send garbage: the right error, then recovery."""

from collections.abc import Callable, Iterator
from contextlib import ExitStack, contextmanager
from pathlib import Path

import pytest

from drivers.bench import BenchInstruments
from drivers.errors import DriverError, LinkLost, LinkTimeout, ProtocolError
from drivers.roles import CaptureSettings, Drive
from profiles.bench import Bench
from profiles.instrument import Role
from tests.drivers.faults import Cut, Fault, Garbage, Latency, Relay, relay_to
from tests.drivers.simulated import opened, simulated

DRIVE = Drive(frequency_hz=2.25e6, amplitude_v=10.0, cycles=8, repetition_s=2e-3)
CAPTURE = CaptureSettings(sample_rate_hz=125e6, points=1000, start_s=80e-6, averages=1, full_scale_v=0.8)
PATIENCE_S, LATE_S = 0.3, 30.0
Use = Callable[[BenchInstruments], object]


def ask_temperature(i: BenchInstruments) -> object:
    assert i.thermometer is not None
    i.thermometer.ask_temperature()
    return i.thermometer.answer()


def instrument_of(i: BenchInstruments, role: Role) -> object:
    return {"oscilloscope": i.scope, "stage": i.stage, "generator": i.generator, "thermometer": i.thermometer}[role]


USES: dict[Role, Use] = {
    "oscilloscope": lambda i: i.scope.read().counts.size,
    "stage": lambda i: i.stage.position(),
    "generator": lambda i: i.generator.output(True),
    "thermometer": ask_temperature,
}
FAULTS: dict[str, tuple[Fault, type[DriverError]]] = {
    "slow": (Latency(LATE_S), LinkTimeout),
    "cut at once": (Cut(0), LinkLost),
    "cut in the middle": (Cut(1), LinkLost),
    "garbage": (Garbage(b"\xfe#!\x00<Idle|MPos:1,x,-,.|>\r\n" * 20), ProtocolError),
}
# of each family, what answers where: both stages and both oscilloscopes
BENCHES = ["demo-tank", "curve-tank"]


@pytest.fixture(scope="module", params=BENCHES)
def bench(request: pytest.FixtureRequest, tmp_path_factory: pytest.TempPathFactory) -> Iterator[Bench]:
    with simulated(tmp_path_factory.mktemp("bench"), request.param, {}, over_tcp=True) as reached:
        yield reached


@contextmanager
def relayed(bench: Bench) -> Iterator[tuple[BenchInstruments, dict[Role, Relay]]]:
    """The instruments of the bench with a relay before each, ready for use."""
    with ExitStack() as stack:
        relays, attached = {}, {}
        for role, given in bench.instruments.items():
            host, port = given.address.removeprefix("tcp://").split(":")
            relays[role] = stack.enter_context(relay_to(host, int(port)))
            attached[role] = given.model_copy(update={"address": f"tcp://127.0.0.1:{relays[role].port}"})
        i = stack.enter_context(opened(bench.model_copy(update={"instruments": attached})))
        if not i.stage.referenced():
            i.stage.home(20.0)
        i.generator.configure(DRIVE)
        i.scope.configure(CAPTURE)
        i.generator.output(True)
        i.scope.arm()
        i.scope.wait(20.0)
        yield i, relays


@pytest.mark.parametrize("fault", FAULTS)
@pytest.mark.parametrize("role", USES)
def test_a_fault_is_the_right_error_in_one_line_and_is_recovered_from(
    bench: Bench, role: Role, fault: str, tmp_path: Path
) -> None:
    broken, kind = FAULTS[fault]
    with relayed(bench) as (i, relays):
        instrument = instrument_of(i, role)
        link, usual_s = instrument.link, instrument.link.timeout_s  # type: ignore[attr-defined]
        link.timeout_s = PATIENCE_S if fault == "slow" else usual_s
        relays[role].break_it(broken)
        with pytest.raises(DriverError) as failure:
            USES[role](i)
        relays[role].heal()
        link.timeout_s = usual_s
        assert type(failure.value) is kind
        told = str(failure.value)
        assert told
        assert "\n" not in told
        assert told.isprintable()
        instrument.recover()  # type: ignore[attr-defined]
        assert link.in_step
        i.generator.output(True)
        i.scope.arm()
        i.scope.wait(20.0)
        assert USES["oscilloscope"](i) == CAPTURE.points
        for use in USES.values():
            use(i)


def test_an_instrument_that_is_slow_but_in_time_is_no_fault(bench: Bench) -> None:
    with relayed(bench) as (i, relays):
        for relay in relays.values():
            relay.break_it(Latency(0.02))
        for use in USES.values():
            use(i)
