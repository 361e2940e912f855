"""One scan from plan to store. The thread that runs it owns every link of the bench while it runs.

For each point: arrive and stand still, capture, read the position again; then the stage starts for the next point
while the waveform of this one is transferred and handed to the recorder, which stores and judges it beside.
"""

from __future__ import annotations

from collections.abc import Callable
from functools import partial
from math import inf
from pathlib import Path
from time import monotonic
from typing import TypeVar

from msgspec import Raw

from acquire.control import Control
from acquire.header import StoreHeader, circumstances_from_mapping, read_attributes, seconds_since
from acquire.messages import (
    Event,
    FindingChanged,
    Notice,
    Progress,
    ScanStarted,
    ScanState,
    StateChanged,
)
from acquire.mover import Mover, Where
from acquire.plan import Plan, PlanPoint
from acquire.prepare import Job, circumstances_of, first_settings, plan_of, resolved
from acquire.record import PointRecord
from acquire.recorder import Recorder
from acquire.source_switch import SourceSwitch
from acquire.taken import record_of
from acquire.travel import check_way
from drivers.autorange import autorange
from drivers.bench import BenchInstruments
from drivers.errors import Cancelled, DriverError, LinkError
from drivers.roles import CaptureSettings
from drivers.trace import Trace
from profiles.units import MS, US

HOMING_S = 300.0
SLACK_S = 3.0  # beyond the time that the triggers of a capture take
THERMOMETER_S = 0.05
TEMPERATURE_EVERY = 5  # points
PROGRESS_EVERY_S = 0.2
EVENTS_EVERY_S = 0.01
RECONNECTS, RECONNECT_PAUSE_S = 3, 2.0
HOLD_LOOKS_S = 0.05

Publish = Callable[[Event | Raw], None]
T = TypeVar("T")


class Stopped(Exception):
    """The operator broke the scan off."""


class Conductor:
    """Runs one scan; `publish` must not block."""

    def __init__(
        self, job: Job, instruments: BenchInstruments, control: Control, publish: Publish, store: Path
    ) -> None:
        self._job = job
        self._i = instruments
        self._control = control
        self._publish = publish
        self._store = store
        self._pivot = job.pivot
        self._mover = Mover(instruments.stage, job.pivot, job.bench)
        self._temperature_c = job.bench.water.temperature_c
        self._patience_s = THERMOMETER_S
        self._answer_due = False
        self._samples_due = False
        self._source = SourceSwitch(instruments.generator)
        self._reconnects = 0
        self._there: tuple[PlanPoint, Where] | None = None  # where the stage stands before the first point
        self._began = 0.0  # monotonic clock where the scan's own stands at zero
        self.done = 0
        self.planned = 0

    @property
    def source_on(self) -> bool:
        """As last switched; True while that is not certain."""
        return self._source.may_be_on

    def run(self, continue_store: bool = False) -> bool:
        """The whole scan; True when it was sealed, False when the operator broke it off.

        Raises:
            PlanRefused, MeasurementError: the scan cannot be done here; nothing moved.
            DriverError: an instrument failed for good; what was stored stays.
            RecorderFailed: storing failed.
        """
        self._state("preparing")
        try:
            return self._prepared_run(continue_store)
        except Cancelled:  # before the first point
            self._stop_stage()
            raise
        finally:
            self._source.make_sure_it_is_off(self._notice)
            self._leave_nothing_unanswered()

    # --- before the first point -------------------------------------------------------------------------

    def _prepared_run(self, continue_store: bool) -> bool:
        self._read_temperature()
        stored = read_attributes(self._store) if continue_store else None
        self._job = resolved(self._job, self._temperature_c)
        plan = plan_of(self._job, self._temperature_c)
        self.planned = len(plan)
        scope = self._i.scope
        wanted = first_settings(self._job, plan, self._temperature_c, scope.full_scales_v()[-1])
        interval_s = 1 / scope.configure(wanted).sample_rate_hz
        # asked once before anything moves, so that a burst that does not fit is refused in time
        circumstances_of(self._job, plan, self._temperature_c, interval_s, wanted.start_s)
        self._go_to_reference(plan)
        self._i.generator.configure(self._job.drive())
        settings = self._choose_range(wanted)
        trace = self._capture(settings)
        scaling = trace.scaling
        if stored is not None:
            exact = circumstances_from_mapping(stored["circumstances"])
        else:
            exact = circumstances_of(self._job, plan, self._temperature_c, scaling.interval_s, scaling.start_s)
        self._publish(self._started(plan, exact.frequencies_hz.tolist()))
        dtype, samples = trace.counts.dtype.name, trace.counts.size
        header = self._header(settings)
        self._began = monotonic()
        before_s = 0.0 if stored is None else seconds_since(stored["started_utc"])
        with Recorder(self._store, header, exact, dtype, samples, len(plan), continue_store) as recorder:
            self.done = recorder.already_stored
            # the scan's clock goes on after a break, and never back, whatever was done to the wall clock
            self._began -= max(before_s, recorder.last_time_s)
            return self._visit(plan.points[self.done :], recorder, settings)

    def _header(self, settings: CaptureSettings) -> StoreHeader:
        """The profiles with range and start as they were used, so that the scan can be run again as it was."""
        capture = {"full_scale_v": settings.full_scale_v, "start_us": settings.start_s / US}
        scan = self._job.scan.model_dump(mode="json")
        scan["capture"] |= capture
        others = {k: getattr(self._job, k).model_dump(mode="json") for k in ("bench", "sensor", "source")}
        return StoreHeader(scan=scan, **others)

    def _started(self, plan: Plan, frequencies_hz: list[float]) -> ScanStarted:
        return ScanStarted(
            name=self._job.scan.name,
            scan_type=plan.scan_type,
            store=str(self._store),
            planned_points=len(plan),
            frequencies_hz=frequencies_hz,
            axes_shown=list(plan.moving),
            sensor=self._job.sensor.name,
            source=self._job.source.name,
        )

    def _go_to_reference(self, plan: Plan) -> None:
        stage = self._i.stage
        if not stage.referenced():
            self._notice("homing the stage: its position is not known")
            stage.home(HOMING_S, self._control.stop_asked)
        first = plan.points[0]
        if self._job.scan.capture.full_scale_v is None and first.pose != plan.reference:
            first = PlanPoint(-1, plan.reference, reference=True, plane=0)  # where the signal is strongest
        self._check_way_to(first)
        self._there = (first, self._mover.arrive(first.pose, self._control.stop_asked))

    def _check_way_to(self, point: PlanPoint) -> None:
        check_way(self._mover.stand().element, point.pose, self._pivot, self._job.bench)

    def _choose_range(self, wanted: CaptureSettings) -> CaptureSettings:
        """The range of the scan, or the one that the first point asks for."""
        scope = self._i.scope
        if self._job.scan.capture.full_scale_v is not None:
            return scope.configure(wanted)
        chosen = autorange(wanted, scope.full_scales_v(), self._capture)
        self._notice(f"vertical range {chosen.full_scale_v:g} V, found at the reference point")
        return scope.configure(chosen)

    def _capture(self, settings: CaptureSettings) -> Trace:
        self._i.scope.configure(settings)
        self._source.turn(True)
        self._i.scope.arm()
        self._i.scope.wait(self._capture_timeout_s(), self._control.stop_asked)
        return self._i.scope.read()

    # --- the points -------------------------------------------------------------------------------------

    def _visit(self, points: tuple[PlanPoint, ...], recorder: Recorder, settings: CaptureSettings) -> bool:
        started = told = heard = monotonic()
        first = self.done
        self._state("running")
        try:
            if points and not self._stands_at(points[0]):
                self._check_way_to(points[0])
            for at, point in enumerate(points):
                self._between(recorder)
                following = points[at + 1] if at + 1 < len(points) else None
                record, trace = self._with_repairs(partial(self._point, point, following))
                if trace.full_scale_v != settings.full_scale_v:
                    raise DriverError("the vertical range changed during the scan: leave the panel alone")
                recorder.put(record, trace.counts)
                self.done += 1
                now = monotonic()
                if now - heard >= EVENTS_EVERY_S:
                    heard = now
                    self._pass_on(recorder.poll())
                if now - told >= PROGRESS_EVERY_S:
                    told = now
                    self._progress(started, first)
            self._pass_on(recorder.poll())
            self._between(recorder)
        except (Stopped, Cancelled):
            self._state("stopping", self._control.reason)
            self._stop_stage()
            self._source.turn(False)
            self._pass_on(recorder.finish(sealed=False))
            return False
        self._source.turn(False)
        self._pass_on(recorder.finish(sealed=True))
        self._progress(started, first)
        return True

    def _point(self, point: PlanPoint, following: PlanPoint | None) -> tuple[PointRecord, Trace]:
        if self._there and self._stands_at(point):
            before = self._there[1]
        else:
            before = self._mover.arrive(point.pose, self._control.stop_asked)
        self._there = None
        if self._job.scan.capture.dwell_ms and self._control.wait_for_stop(self._job.scan.capture.dwell_ms * MS):
            raise Stopped
        scope = self._i.scope
        scope.arm()
        scope.wait(self._capture_timeout_s(), self._control.stop_asked)
        captured = monotonic()
        stage = self._i.stage
        # all is asked before any answer is awaited; the stage answers in order, so the position is the old one
        self._samples_due = True
        scope.ask_samples()
        with stage.link.together():
            stage.ask_position()
            if following is not None:
                self._mover.start(following.pose)
        after = self._mover.where(stage.read_position())
        if point.index % TEMPERATURE_EVERY == 0:
            self._look_after_temperature(first=point.index == 0)
        trace = scope.read_samples()
        self._samples_due = False
        time_s = captured - self._began
        return record_of(point, self._pivot, before, after, time_s, self._temperature_c, trace), trace

    def _stands_at(self, point: PlanPoint) -> bool:
        return self._there is not None and self._there[0] is point

    # --- beside the points ------------------------------------------------------------------------------

    def _between(self, recorder: Recorder) -> None:
        """Stop or hold where the operator asked for it."""
        if self._control.stop_asked():
            raise Stopped
        if not self._control.hold_asked():
            return
        self._source.turn(False)
        self._state("held", self._control.reason)
        while not self._control.wait_to_go(HOLD_LOOKS_S):
            self._pass_on(recorder.poll())
        if self._control.stop_asked():
            raise Stopped
        self._with_repairs(partial(self._source.turn, True))
        self._state("running")

    def _pass_on(self, events: list[Event | Raw]) -> None:
        """Publish what the recorder says, and hold where the scan's policy asks for it."""
        for event in events:
            self._publish(event)
            if isinstance(event, FindingChanged) and event.action == "raised":
                severity = event.finding["severity"]
                if severity in self._job.scan.hold_on:
                    self._control.ask_hold(f"{severity}: {event.finding['code']}")

    def _progress(self, started: float, first: int) -> None:
        elapsed = monotonic() - started
        taken = self.done - first
        left = elapsed / taken * (self.planned - self.done) if taken else inf
        self._publish(Progress(done=self.done, planned=self.planned, elapsed_s=elapsed, left_s=left))

    def _notice(self, text: str) -> None:
        self._publish(Notice(text=text))

    def _state(self, state: ScanState, reason: str = "") -> None:
        self._publish(StateChanged(state=state, reason=reason))

    def _capture_timeout_s(self) -> float:
        return self._job.scan.capture.averages / self._job.source.repetition_hz * 2 + SLACK_S

    def _stop_stage(self) -> None:
        self._i.stage.stop()
        self._mover.forget()

    def _leave_nothing_unanswered(self) -> None:
        """A scan that failed may leave a move under way: its answer must not be there for the next one."""
        if self._i.stage.link.in_step:
            try:
                self._mover.end_move(self._control.stop_asked)
            except DriverError as error:
                self._notice(f"the stage did not end its move: {error}")

    # --- links that fail --------------------------------------------------------------------------------

    def _with_repairs(self, action: Callable[[], T]) -> T:
        """Do something; a link that fails meanwhile is made anew and it is done again, a few times in a scan.

        Raises:
            LinkError: there were too many failures.
        """
        failed = False
        while True:
            try:
                if failed:
                    self._repair()
                return action()
            except LinkError as error:
                self._reconnects += 1
                if self._reconnects > RECONNECTS:
                    raise
                self._notice(f"{error}; reconnecting, try {self._reconnects} of {RECONNECTS}")
                failed = True

    def _repair(self) -> None:
        """Make every link anew that is out of step, or that owes an answer to what was broken off.

        The source is off meanwhile as far as its own link allows, and on again afterwards.
        """
        i = self._i
        if i.generator.link.in_step:
            self._source.turn(False)
        if self._control.wait_for_stop((self._reconnects - 1) * RECONNECT_PAUSE_S):
            raise Stopped
        if self._samples_due or not i.scope.link.in_step:
            i.scope.recover()
            self._samples_due = False
        if i.thermometer is not None and not i.thermometer.link.in_step:
            i.thermometer.recover()
            self._answer_due = False
        if i.stage.link.in_step:
            self._mover.end_move(self._control.stop_asked)
        else:
            i.stage.recover()
            self._mover.forget()
        self._source.turn(True)

    # --- temperature ------------------------------------------------------------------------------------

    def _read_temperature(self) -> None:
        if self._i.thermometer is not None:
            self._i.thermometer.ask_temperature()
            self._temperature_c = self._i.thermometer.answer()
            self._i.thermometer.ask_temperature()
            self._answer_due = True
        self._patience_s = THERMOMETER_S

    def _look_after_temperature(self, first: bool) -> None:
        """Take the answer asked for a point ago, and ask anew; a thermometer that is slower is not waited for.

        Counted in points and not in seconds, so that a replay stores the same temperature with the same point.
        """
        thermometer = self._i.thermometer
        if thermometer is None:
            return
        if not self._answer_due:  # after a repair
            thermometer.ask_temperature()
            self._answer_due = True
        elif thermometer.answer_ready(self._patience_s):
            value = thermometer.answer()
            self._temperature_c = self._temperature_c if first else value
            thermometer.ask_temperature()
        else:
            self._patience_s = 0.0
