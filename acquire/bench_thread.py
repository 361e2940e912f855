"""The thread that owns the instruments: it opens them, runs the scans that are asked for, and leaves them safe."""

from __future__ import annotations

import sys
import traceback
from collections.abc import Mapping
from pathlib import Path
from queue import Empty, SimpleQueue
from threading import Event as Flag
from threading import Thread

from msgspec import Raw

from acquire.conductor import Conductor
from acquire.control import Control
from acquire.messages import Event, ScanState, StateChanged
from acquire.prepare import Job
from acquire.recorder import RecorderFailed
from acquire.travel import PlanRefused
from checks.errors import MeasurementError
from drivers.bench import BenchInstruments, open_instruments
from drivers.errors import Cancelled, DriverError
from profiles.bench import Bench
from profiles.instrument import Instrument, Role

LOOK_S = 0.1
SWITCH_S = 5e-4  # how long another thread may keep the interpreter from the one that talks to instruments
KNOWN = (DriverError, RecorderFailed, PlanRefused, MeasurementError, ValueError, OSError)


class BenchThread(Thread):
    """`events` gets whatever is to be published; `failed` tells why the bench could not be opened or kept."""

    def __init__(self, bench: Bench, profiles: Mapping[Role, Instrument]) -> None:
        super().__init__(name="bench")
        self.events: SimpleQueue[Event | Raw] = SimpleQueue()
        self.control = Control()
        self.ready = Flag()
        self.failed: str | None = None
        self.identities: dict[str, str] = {}
        self.state: ScanState = "idle"
        self.job: Job | None = None
        self.store: Path | None = None
        self._bench = bench
        self._profiles = profiles
        self._wanted: SimpleQueue[tuple[Job, Path, bool]] = SimpleQueue()
        self._end = Flag()
        self._conductor: Conductor | None = None

    def ask(self, job: Job, store: Path, continue_store: bool) -> None:
        """Run a scan as soon as the thread is free."""
        self.control.reset()
        self.state, self.job, self.store = "preparing", job, store
        self._wanted.put((job, store, continue_store))

    def end(self, reason: str) -> None:
        """Break off what runs, leave the bench safe, end the thread."""
        self._end.set()
        self.control.ask_stop(reason)

    def progress(self) -> tuple[int, int, bool]:
        """Points done, points planned, whether the source is on."""
        c = self._conductor
        return (c.done, c.planned, c.source_on) if c is not None else (0, 0, False)

    def run(self) -> None:
        """Until `end`."""
        sys.setswitchinterval(SWITCH_S)
        try:
            with open_instruments(self._bench, self._profiles) as instruments:
                self.identities = instruments.identities()
                self.ready.set()
                while not self._end.is_set():
                    self._serve_one(instruments)
        except DriverError as error:
            self.failed = str(error)
        except Exception as error:  # the daemon must not answer on as if it had a bench
            self.failed = unexpected(error)
        finally:
            self.ready.set()

    def _serve_one(self, instruments: BenchInstruments) -> None:
        try:
            job, store, continue_store = self._wanted.get(timeout=LOOK_S)
        except Empty:
            return
        self._conductor = Conductor(job, instruments, self.control, self.publish, store)
        try:
            for instrument in (instruments.generator, instruments.scope, instruments.stage, instruments.thermometer):
                if instrument is not None and not instrument.link.in_step:
                    instrument.recover()
            sealed = self._conductor.run(continue_store)
            if sealed:
                self.publish(StateChanged(state="sealed", reason=f"all points are in {store}"))
            else:
                reason = self.control.reason or "by the operator"
                self.publish(StateChanged(state="broken-off", reason=f"{reason}; what was stored is in {store}"))
        except Cancelled:
            self.publish(StateChanged(state="broken-off", reason=self.control.reason or "by the operator"))
        except KNOWN as error:
            self.publish(StateChanged(state="failed", reason=str(error)))
        except Exception as error:  # this scan is over, the source is off; the next one may be tried
            self.publish(StateChanged(state="failed", reason=unexpected(error)))

    def publish(self, event: Event | Raw) -> None:
        """Pass an event on, and remember the state."""
        if isinstance(event, StateChanged):
            self.state = event.state
        self.events.put(event)


def unexpected(error: Exception) -> str:
    """One line for the user; where it happened goes to the daemon's own output."""
    traceback.print_exception(error)
    return f"a fault of truepivot itself ({type(error).__name__}: {error}); the daemon's output tells where"
