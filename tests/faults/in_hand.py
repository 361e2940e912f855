"""One scan of a drawn bench in one process: the simulator's motion, tank and digitiser, the real plan and checks."""

from __future__ import annotations

from collections.abc import Iterator
from dataclasses import dataclass, field
from functools import cached_property

from threadpoolctl import threadpool_limits

from acquire.judge import Judge
from acquire.mover import Where
from acquire.plan import AXIS_NUMBER, Plan
from acquire.prepare import circumstances_of, first_settings, plan_of
from acquire.record import Five, PointRecord
from acquire.results.quantity import Quantity
from acquire.results.rotation import quantities, rotation_results
from acquire.taken import record_of
from acquire.travel import approach_from, plays_of
from checks.finding import Change
from checks.observation import Circumstances, Observation
from checks.rotation_fit import PlaneResult
from drivers.autorange import autorange
from drivers.roles import CaptureSettings
from drivers.trace import Scaling, Trace
from profiles.model import AXES, Axis
from sim_hardware.capture import CaptureRequest, DriveState
from sim_hardware.clock import Timeline
from sim_hardware.digitise import quantise
from sim_hardware.motion import Motion, axis_limits
from sim_hardware.tank import SimulatedTank
from tests.faults.drawn import Drawn

BITS = 16
BLOCK = 8
SCALES_V = (0.01, 0.02, 0.04, 0.1, 0.2, 0.4, 1.0, 2.0, 4.0, 10.0)
POINT_S = 0.15  # what a point takes besides its move and its triggers: settling, transfer


@dataclass
class Scanned:
    """What a scan gave."""

    bench: Drawn
    circumstances: Circumstances
    seen: list[Observation]
    changes: list[Change] = field(default_factory=list)
    full_scale_v: float = 0.0

    @cached_property
    def results(self) -> list[PlaneResult]:
        """Of a rotation, plane by plane."""
        return rotation_results(self.seen, self.circumstances)

    @cached_property
    def quantities(self) -> list[Quantity]:
        """Of a rotation."""
        return quantities(self.results, self.circumstances)

    def one(self, name: str, **conditions: float | str) -> Quantity:
        """The first quantity of that name with these conditions."""
        return next(q for q in self.quantities if q.name == name and conditions.items() <= q.conditions.items())

    def raised(self) -> dict[str, int]:
        """Codes of cautions and halts, each with the point at which it was first raised."""
        first: dict[str, int] = {}
        for change in self.changes:
            if change.action == "raised" and change.finding.severity != "note":
                first.setdefault(change.finding.code, change.at_point)
        return first


class Hand:
    """The bench in hand: moves and captures at once."""

    def __init__(self, bench: Drawn, noiseless: bool = False) -> None:
        self._bench = bench
        truth = bench.truth
        if noiseless:
            quiet = {"noise_uv": 0.0, "jitter_ns": 0.0}
            truth = bench.altered(electronics=quiet, mechanics={"readback_sigma_um": 0.0}).truth
        self._time = Timeline(speed=None)
        self.tank = SimulatedTank(truth)
        self._motion = Motion(axis_limits(bench.job.bench.axes), truth.mechanics, self._time, bench.seed)
        self._motion.home()
        self._time.run_due()
        self._plays = plays_of(bench.job.bench)
        self._count = 0
        self.bits = BITS
        drive = bench.job.drive()
        self._drive = DriveState(True, drive.frequency_hz, drive.amplitude_v, drive.cycles, drive.repetition_s)

    def temperature_c(self) -> float:
        """As a thermometer tells it."""
        return round(self.tank.thermometer_c(self._time.now()), 3)

    def now_s(self) -> float:
        """Simulated."""
        return self._time.now()

    def go(self, carriage: Five) -> None:
        """There, backlash taken up."""
        for target in (approach_from(carriage, self._plays), carriage):
            if target is not None:
                wanted: dict[Axis, float] = {a: target[AXIS_NUMBER[a]] for a in AXES if a in self._motion.limits}
                self._motion.go_each(wanted, self._motion.limits)
                self._time.run_due()

    def reported(self) -> Where:
        """Read back."""
        told = self._motion.reported()
        x, y, z, theta, phi = (told.get(a, 0.0) for a in AXES)
        carriage = (x, y, z, theta, phi)
        return Where(carriage, self._bench.job.pivot.element_at(carriage))

    def wait(self, seconds: float) -> None:
        """Let time pass."""
        self._time.schedule(self._time.now() + seconds, lambda: None)
        self._time.run_due()

    def capture(self, settings: CaptureSettings) -> Trace:
        """One averaged waveform."""
        now = self._time.now()
        self._count += 1
        request = CaptureRequest(
            self._count, now, (self._motion.carriage(now),), self._drive, settings.sample_rate_hz, settings.points,
            settings.start_s, settings.averages,
        )  # fmt: skip
        counts = quantise(self.tank.voltage(request), settings.full_scale_v, settings.offset_v, self.bits)
        self.wait(settings.averages * self._drive.repetition_s)
        scaling = Scaling(
            settings.full_scale_v / 2.0**self.bits, settings.offset_v, 1 / settings.sample_rate_hz, settings.start_s
        )
        rail = 2 ** (self.bits - 1)
        return Trace(counts, scaling, -rail, rail - 1, settings.averages, settings.full_scale_v)


def scanned(bench: Drawn, noiseless: bool = False) -> Scanned:
    """Do the whole scan and judge it, as the recorder does with one thread of linear algebra."""
    with threadpool_limits(1, "blas"):
        return _scanned(bench, noiseless)


def _scanned(bench: Drawn, noiseless: bool) -> Scanned:
    hand = Hand(bench, noiseless)
    job = bench.job
    warmth = hand.temperature_c()
    plan = plan_of(job, warmth)
    wanted = first_settings(job, plan, warmth, SCALES_V[-1])
    hand.go(job.pivot.carriage_for(plan.reference))
    settings = autorange(wanted, SCALES_V, hand.capture)
    circumstances = circumstances_of(job, plan, warmth, 1 / wanted.sample_rate_hz, wanted.start_s)
    judge = Judge(circumstances)
    result = Scanned(bench, circumstances, [])
    records, counts = [], []
    for record, trace in _points(hand, bench, plan, settings):
        records.append(record)
        counts.append(trace.counts)
        if len(records) == BLOCK:
            result.seen += judge.take(records, counts)[0]
            records, counts = [], []
    if records:
        result.seen += judge.take(records, counts)[0]
    judge.finish()
    result.changes, result.full_scale_v = judge.changes, settings.full_scale_v
    return result


def _points(hand: Hand, bench: Drawn, plan: Plan, settings: CaptureSettings) -> Iterator[tuple[PointRecord, Trace]]:
    began = hand.now_s()
    for point in plan.points:
        hand.go(bench.job.pivot.carriage_for(point.pose))
        hand.wait(POINT_S)
        before = hand.reported()
        time_s = hand.now_s() - began
        trace = hand.capture(settings)
        after = hand.reported()
        yield record_of(point, bench.job.pivot, before, after, time_s, hand.temperature_c(), trace), trace
