"""A simulated bench put together: which instruments there are, what they share, and who may talk to them."""

from __future__ import annotations

from collections.abc import Callable, Mapping
from dataclasses import dataclass
from functools import partial

from profiles.bench import Bench
from profiles.instrument import Instrument, Role
from profiles.model import AXES
from sim_hardware.acquired import CHANNELS, CaptureSource, LiveSource
from sim_hardware.bank import Bank
from sim_hardware.capture import Tank
from sim_hardware.clock import Timeline
from sim_hardware.conversation import Conversation
from sim_hardware.generator import BurstGenerator
from sim_hardware.motion import Motion, axis_limits, axis_overrun
from sim_hardware.replay import BankMotion, BankSource, Replay
from sim_hardware.scope import Scope
from sim_hardware.scope_curve import CurveScope
from sim_hardware.scope_preamble import PreambleScope
from sim_hardware.scpi import ScpiInstrument, ScpiSession
from sim_hardware.stage_iso import IsoSession, IsoStage
from sim_hardware.stage_prefix import PrefixSession, PrefixStage
from sim_hardware.sync import SyncLine
from sim_hardware.thermometer import Thermometer
from sim_hardware.truth import MechanicsTruth

Converse = Callable[[], Conversation]


class BenchError(ValueError):
    """The bench cannot be simulated; the message is one line."""


@dataclass(frozen=True)
class SimulatedBench:
    """What the transport serves.

    Attributes:
        converse: for each role, begins a conversation with its instrument.
        prepare: works ahead when nobody wants anything; False when nothing is left to do.
    """

    converse: Mapping[Role, Converse]
    prepare: Callable[[], bool]


def live_bench(
    bench: Bench,
    instruments: Mapping[Role, Instrument],
    timeline: Timeline,
    tank: Tank,
    mechanics: MechanicsTruth,
    seed: int = 0,
) -> SimulatedBench:
    """Instruments around a tank. Raises BenchError for a channel that the oscilloscope has not."""
    motion = Motion(axis_limits(bench.axes), mechanics, timeline, seed)
    sync = SyncLine()
    generator = BurstGenerator(timeline, sync)
    channel = bench.instruments["oscilloscope"].channel
    if channel > CHANNELS:
        raise BenchError(f"instruments.oscilloscope.channel: {channel} given; allowed: 1 to {CHANNELS}")
    source = LiveSource(tank, motion, generator.drive, channel)
    thermometer = Thermometer(lambda: f"{tank.thermometer_c(timeline.now()):.3f}", timeline.run_due)
    return _assemble(instruments, timeline, motion, sync, generator, source, thermometer)


def bank_bench(bench: Bench, instruments: Mapping[Role, Instrument], timeline: Timeline, bank: Bank) -> SimulatedBench:
    """Instruments that answer from a bank."""
    limits = axis_limits(bench.axes)
    floor = [limits[a].low if a in limits else 0.0 for a in AXES]
    replay = Replay(bank, [axis_overrun(bench.axes, a) for a in AXES], floor)
    motion = BankMotion(limits, MechanicsTruth(), timeline)
    motion.replay = replay
    sync = SyncLine()
    generator = BurstGenerator(timeline, sync)
    thermometer = Thermometer(lambda: repr(replay.temperature_c()), timeline.run_due)
    return _assemble(instruments, timeline, motion, sync, generator, BankSource(replay), thermometer)


def _assemble(
    instruments: Mapping[Role, Instrument],
    timeline: Timeline,
    motion: Motion,
    sync: SyncLine,
    generator: BurstGenerator,
    source: CaptureSource,
    thermometer: Thermometer,
) -> SimulatedBench:
    scope = _scope(instruments["oscilloscope"], timeline, sync, source)
    scpi: dict[Role, ScpiInstrument] = {
        "oscilloscope": scope,
        "generator": generator,
        "thermometer": thermometer,
    }
    converse: dict[Role, Converse] = {
        role: partial(ScpiSession, scpi[role], instrument.terminator.encode("ascii"))
        for role, instrument in instruments.items()
        if role in scpi
    }
    converse["stage"] = _stage(instruments["stage"], timeline, motion)
    return SimulatedBench(converse, scope.prepare)


def _scope(instrument: Instrument, timeline: Timeline, sync: SyncLine, source: CaptureSource) -> Scope:
    if instrument.scope is None:
        raise BenchError(f"{instrument.name}: no [scope] table")
    family = PreambleScope if instrument.family == "preamble" else CurveScope
    return family(instrument.scope, timeline, sync, source)


def _stage(instrument: Instrument, timeline: Timeline, motion: Motion) -> Converse:
    if instrument.family == "iso-words":
        return partial(IsoSession, IsoStage(motion, timeline), timeline)
    return partial(PrefixSession, PrefixStage(motion, timeline), timeline)
