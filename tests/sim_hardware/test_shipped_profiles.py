"""Every command of every shipped instrument profile is understood by the simulated instrument of its family."""

from __future__ import annotations

import pytest

from profiles.instrument import Instrument
from profiles.load import available, load_instrument
from sim_hardware.bench import SimulatedBench, live_bench
from sim_hardware.clock import Timeline
from sim_hardware.truth import MechanicsTruth
from tests.sim_hardware.bench_files import a_bench
from tests.sim_hardware.talking import KnownTank, say

FIELDS = {
    "channel": 1, "volts": 0.1, "per_division": 0.0125, "hertz": 2e6, "points": 500, "seconds": 1e-3, "on": True,
    "count": 4, "bits": 16, "byte_order": "msb_first", "cycles": 3,
}  # fmt: skip
# what must be there before the commands that only read
FIRST = (
    b"SOUR:BURS:STAT ON;:OUTP ON\n",
    b":INIT\n",
    b"HEAD 0;:ACQ:STATE RUN\n",
)


def shipped() -> list[str]:
    return [name for name in available("instrument") if load_instrument(name).role != "stage"]


def around(instrument: Instrument) -> SimulatedBench:
    bench = a_bench()
    instruments = {role: load_instrument(attached.profile) for role, attached in bench.instruments.items()}
    instruments[instrument.role] = instrument
    tank = KnownTank(lambda t: 0.0 * t)
    return live_bench(bench, instruments, Timeline(None), tank, MechanicsTruth())


def test_there_are_instruments_of_every_role_and_family() -> None:
    found = {(i.role, i.family) for i in map(load_instrument, available("instrument"))}
    assert {("oscilloscope", "preamble"), ("oscilloscope", "curve"), ("generator", "burst")} <= found
    assert {("stage", "iso-words"), ("stage", "axis-prefix"), ("thermometer", "query")} <= found


@pytest.mark.parametrize("name", shipped())
def test_every_command_is_understood(name: str) -> None:
    instrument = load_instrument(name)
    simulated = around(instrument)
    session = simulated.converse[instrument.role]()
    if instrument.role == "oscilloscope":
        say(simulated.converse["generator"](), FIRST[0])
        say(session, FIRST[1 if instrument.family == "preamble" else 2])
        assert say(session, b"*OPC?\n") == b"1\n"
    order = sorted(instrument.commands, key=lambda a: a in ("arm", "stop"))
    for action in order:
        text = instrument.commands[action].format(**FIELDS)
        reply = say(session, text.encode() + instrument.terminator.encode())
        assert say(session, b"SYST:ERR?\n") == b'0,"No error"' + instrument.terminator.encode(), (action, text)
        assert bool(reply) == text.endswith("?"), (action, text)
