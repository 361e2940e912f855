"""The order of things in a scan, with instruments that only note what they are asked for."""

from __future__ import annotations

from collections.abc import Iterator, Mapping
from contextlib import contextmanager
from dataclasses import dataclass, field
from datetime import UTC, datetime, timedelta
from itertools import pairwise
from pathlib import Path
from typing import Any, NoReturn, cast

import numpy as np
import pytest

from acquire import conductor as module
from acquire import source_switch
from acquire.conductor import RECONNECTS, Conductor
from acquire.control import Control
from acquire.layout import put_attributes
from acquire.messages import Notice, StateChanged
from acquire.prepare import Job
from acquire.store import open_stored
from acquire.travel import PlanRefused
from drivers.bench import BenchInstruments
from drivers.errors import Cancelled, DriverError, LinkTimeout, OutOfLimits, ProtocolError
from drivers.roles import CaptureSettings, Drive
from drivers.trace import Scaling, Trace
from profiles.bench import Bench, KeepOut
from profiles.load import load_bench, load_scan, load_sensor, load_source
from profiles.scan import Scan


@dataclass
class FakeLink:
    """In step until told otherwise."""

    in_step: bool = True

    @contextmanager
    def together(self) -> Iterator[None]:
        yield


@pytest.fixture(autouse=True)
def _no_pause(monkeypatch: pytest.MonkeyPatch) -> None:
    monkeypatch.setattr(module, "RECONNECT_PAUSE_S", 0.0)
    monkeypatch.setattr(source_switch, "PAUSE_S", 0.0)


OWES = {"scope": "samples", "stage": "move", "generator": ""}


@dataclass
class Fakes:
    """All instruments of a bench; `log` has their calls in order, `fail_at` makes captures fail.

    Like real ones they keep answers that nobody has read: whoever asks again before gets an `AssertionError`.
    """

    log: list[str] = field(default_factory=list)
    fail_at: set[int] = field(default_factory=set)
    captures: int = 0
    on: bool = False
    at: dict[str, float] = field(default_factory=dict)
    stop_after: int | None = None
    control: Control = field(default_factory=Control)
    settings: CaptureSettings | None = None
    links: dict[str, FakeLink] = field(default_factory=lambda: {r: FakeLink() for r in OWES})
    identity: str = "fake"
    axes: tuple[str, ...] = ("x", "y", "z", "theta", "phi")
    owed: list[str] = field(default_factory=list)

    def ask(self, what: str) -> None:
        assert what not in self.owed, f"{what} is still unanswered"
        self.owed.append(what)

    def answer(self, what: str) -> None:
        assert what in self.owed, f"{what} was not asked for"
        self.owed.remove(what)

    # --- oscilloscope
    def full_scales_v(self) -> tuple[float, ...]:
        return (0.1, 1.0, 10.0)

    def configure(self, settings: Any) -> Any:
        if isinstance(settings, Drive):
            self.log.append("drive")
            return None
        self.settings = settings
        return settings

    def arm(self) -> None:
        assert "samples" not in self.owed, "the samples of the last capture would answer"
        self.log.append(f"arm, source {'on' if self.on else 'off'}")

    def wait(self, timeout_s: float, cancelled: Any = None) -> None:
        self.captures += 1
        if self.captures in self.fail_at:
            self.fail("scope")
        if self.stop_after is not None and self.captures >= self.stop_after:
            self.control.ask_stop("by the test")

    def ask_samples(self) -> None:
        self.log.append("ask samples")
        self.ask("samples")

    def read(self) -> Trace:
        self.ask_samples()
        return self.read_samples()

    def read_samples(self) -> Trace:
        assert self.settings is not None
        self.log.append("read")
        self.answer("samples")
        s = self.settings
        t = s.start_s + np.arange(s.points) / s.sample_rate_hz
        wave = 0.04 * np.sin(2 * np.pi * 2.25e6 * t) * ((t > 80.7e-6) & (t < 86.1e-6))
        per_count = s.full_scale_v / 65536
        counts = np.clip(np.round(wave / per_count), -32768, 32767).astype(np.int16)
        return Trace(
            counts, Scaling(per_count, 0.0, 1 / s.sample_rate_hz, s.start_s), -32768, 32767, s.averages, s.full_scale_v
        )

    # --- stage
    def referenced(self) -> bool:
        return True

    def start_move(self, target: Mapping[str, float]) -> None:
        self.ask("move")
        self.log.append(f"move {np.degrees(target['theta']):.0f}")
        self.at = dict(target)

    def finish_move(self, timeout_s: float, cancelled: Any = None) -> dict[str, float]:
        self.log.append("still")
        self.answer("move")
        return dict(self.at)

    def position(self) -> dict[str, float]:
        return dict(self.at)

    def ask_position(self) -> None:
        self.log.append("ask position")

    def read_position(self) -> dict[str, float]:
        return dict(self.at)

    def stop(self) -> None:
        self.log.append("stop")
        if "move" in self.owed:
            self.answer("move")

    # --- generator
    def output(self, on: bool) -> None:
        self.log.append(f"source {'on' if on else 'off'}")
        self.on = on

    # --- links
    def fail(self, role: str) -> NoReturn:
        self.links[role].in_step = False
        raise LinkTimeout("the fake did not reply")

    def recover(self, role: str) -> None:
        self.log.append(f"recover {role}")
        self.links[role].in_step = True
        self.owed = [what for what in self.owed if what != OWES[role]]
        if role == "generator":
            self.output(False)


class Role:
    """One instrument of the fakes."""

    def __init__(self, fakes: Fakes, role: str) -> None:
        self._fakes, self._role = fakes, role
        self.link = fakes.links[role]

    def recover(self) -> None:
        self._fakes.recover(self._role)

    def __getattr__(self, name: str) -> Any:
        return getattr(self._fakes, name)


SCAN: dict[str, Any] = {
    "rotation": {"span_deg": 40.0, "step_deg": 10.0, "order": "one-way"},
    "revisit_every": 0,
    "capture": {"sample_rate_mhz": 125.0, "points": 2500, "full_scale_v": 0.1},
}


def conducted(fakes: Fakes, store: Path, bench: Bench | None = None, **changes: Any) -> tuple[Conductor, list[Any]]:
    tables = load_scan("demo-rotation-fast").model_dump(mode="json") | SCAN | changes
    scan = Scan.model_validate(tables)
    job = Job(bench or load_bench("demo-tank"), load_sensor(scan.sensor), load_source(scan.source), scan)
    scope, stage, generator = (cast(Any, Role(fakes, role)) for role in OWES)
    events: list[Any] = []
    instruments = BenchInstruments(scope=scope, stage=stage, generator=generator, thermometer=None)
    return Conductor(job, instruments, fakes.control, events.append, store), events


def states(events: list[Any]) -> list[str]:
    return [e.state for e in events if isinstance(e, StateChanged)]


def test_the_stage_starts_for_the_next_point_before_the_waveform_is_read(tmp_path: Path) -> None:
    fakes = Fakes()
    conductor, events = conducted(fakes, tmp_path / "s.zarr")
    assert conductor.run()
    at = fakes.log.index("move -10")
    assert fakes.log[at - 2 : at + 3] == ["ask samples", "ask position", "move -10", "read", "still"]
    assert states(events) == ["preparing", "running"]
    assert [round(float(np.degrees(r.commanded[3]))) for r in open_stored(tmp_path / "s.zarr").records] == [
        -20,
        -10,
        0,
        10,
        20,
    ]


def test_the_source_is_on_for_every_capture_and_off_at_the_end(tmp_path: Path) -> None:
    fakes = Fakes()
    conducted(fakes, tmp_path / "s.zarr")[0].run()
    assert {line for line in fakes.log if line.startswith("arm")} == {"arm, source on"}
    assert fakes.log[-1] == "source off"
    assert not fakes.on


def test_a_stop_ends_the_scan_with_what_was_stored_and_the_source_off(tmp_path: Path) -> None:
    fakes = Fakes(stop_after=4)
    conductor, events = conducted(fakes, tmp_path / "s.zarr")
    assert not conductor.run()
    assert not fakes.on
    assert "stop" in fakes.log
    assert "stopping" in states(events)
    assert 0 < len(open_stored(tmp_path / "s.zarr").records) < 5


def test_a_link_that_fails_is_made_anew_and_the_point_is_taken_again(tmp_path: Path) -> None:
    fakes = Fakes(fail_at={3})
    conductor, events = conducted(fakes, tmp_path / "s.zarr")
    assert conductor.run()
    assert "recover scope" in fakes.log
    assert len(open_stored(tmp_path / "s.zarr").records) == 5
    assert any("reconnecting, try 1 of" in e.text for e in events if isinstance(e, Notice))


def test_a_link_that_fails_for_good_ends_the_scan_and_keeps_what_was_stored(tmp_path: Path) -> None:
    fakes = Fakes(fail_at=set(range(4, 100)))
    conductor, _ = conducted(fakes, tmp_path / "s.zarr")
    with pytest.raises(LinkTimeout, match="the fake did not reply"):
        conductor.run()
    assert fakes.captures == 3 + RECONNECTS + 1
    assert not fakes.on
    assert len(open_stored(tmp_path / "s.zarr").records) == 2


def test_an_exception_anywhere_switches_the_source_off(tmp_path: Path) -> None:
    class Stuck(Fakes):
        def start_move(self, target: Mapping[str, float]) -> None:
            if self.captures >= 3:
                raise OutOfLimits("stuck")
            super().start_move(target)

    fakes = Stuck()
    with pytest.raises(OutOfLimits):
        conducted(fakes, tmp_path / "s.zarr")[0].run()
    assert not fakes.on


def test_nothing_moves_and_nothing_drives_when_the_plan_is_refused(tmp_path: Path) -> None:
    fakes = Fakes()
    with pytest.raises(PlanRefused, match="z = 500 mm"):
        conducted(fakes, tmp_path / "s.zarr", position={"z_mm": 500.0})[0].run()
    assert not any(line.startswith(("move", "source on")) for line in fakes.log)


def test_without_a_range_in_the_scan_it_is_found_at_the_reference_point(tmp_path: Path) -> None:
    fakes = Fakes()
    capture = {"sample_rate_mhz": 125.0, "points": 2500}
    conducted(fakes, tmp_path / "s.zarr", capture=capture)[0].run()
    assert fakes.log.index("move 0") < fakes.log.index("move -20")
    assert {r.full_scale_v for r in open_stored(tmp_path / "s.zarr").records} == {0.1}


def test_backlash_is_taken_up_from_below(tmp_path: Path) -> None:
    fakes = Fakes()
    bench = load_bench("demo-tank")
    theta = cast(Any, bench.axes.theta).model_copy(update={"backlash_deg": 3.0})
    loose = bench.model_copy(update={"axes": bench.axes.model_copy(update={"theta": theta})})
    conducted(fakes, tmp_path / "s.zarr", loose)[0].run()
    moves = [line for line in fakes.log if line.startswith("move")]
    assert moves[:4] == ["move -23", "move -20", "move -13", "move -10"]


def test_the_answer_to_a_move_is_taken_when_only_the_oscilloscope_failed(tmp_path: Path) -> None:
    class Cut(Fakes):
        def read_samples(self) -> Trace:
            if self.captures == 3 and "recover scope" not in self.log:  # the stage is on its way by now
                self.fail("scope")
            return super().read_samples()

    fakes = Cut()
    assert conducted(fakes, tmp_path / "s.zarr")[0].run()
    assert [line for line in fakes.log if line.startswith("recover")] == ["recover scope"]
    records = open_stored(tmp_path / "s.zarr").records
    assert [round(float(np.degrees(r.before[3]))) for r in records] == [-20, -10, 0, 10, 20]
    assert "arm, source off" not in fakes.log


def test_samples_that_were_asked_for_answer_nothing_else_when_only_the_stage_failed(tmp_path: Path) -> None:
    class Cut(Fakes):
        def read_position(self) -> dict[str, float]:
            if self.captures == 3 and "recover stage" not in self.log:
                self.fail("stage")
            return super().read_position()

    fakes = Cut()
    assert conducted(fakes, tmp_path / "s.zarr")[0].run()
    assert [line for line in fakes.log if line.startswith("recover")] == ["recover scope", "recover stage"]
    assert len(open_stored(tmp_path / "s.zarr").records) == 5


def test_the_source_is_off_while_a_link_is_made_anew(tmp_path: Path) -> None:
    fakes = Fakes(fail_at={3})
    conducted(fakes, tmp_path / "s.zarr")[0].run()
    at = fakes.log.index("recover scope")
    assert "source off" in fakes.log[at - 2 : at]
    assert "source on" in fakes.log[at:]


@pytest.mark.parametrize("kind", [LinkTimeout, ProtocolError])
def test_a_source_that_went_on_without_saying_so_is_switched_off(tmp_path: Path, kind: type[DriverError]) -> None:
    class Mute(Fakes):
        def output(self, on: bool) -> None:
            super().output(on)
            if on:
                self.links["generator"].in_step = kind is ProtocolError
                raise kind("the fake does not say whether it is on")

        def recover(self, role: str) -> None:  # the link comes back, the output stays as it was
            self.links[role].in_step = True

    fakes = Mute()
    with pytest.raises(kind):
        conducted(fakes, tmp_path / "s.zarr")[0].run()
    assert not fakes.on


def test_a_generator_that_fails_during_a_hold_is_reached_anew(tmp_path: Path) -> None:
    class Sleepy(Fakes):
        def wait(self, timeout_s: float, cancelled: Any = None) -> None:
            super().wait(timeout_s, cancelled)
            if self.captures == 3:
                self.control.ask_hold("by the test")

        def output(self, on: bool) -> None:
            if on and self.captures == 3 and "recover generator" not in self.log:
                self.fail("generator")
            super().output(on)
            if not on and self.captures == 3:
                self.control.ask_resume()

    fakes = Sleepy()
    conductor, events = conducted(fakes, tmp_path / "s.zarr")
    assert conductor.run()
    assert states(events) == ["preparing", "running", "held", "running"]
    assert "recover generator" in fakes.log
    assert "arm, source off" not in fakes.log
    assert len(open_stored(tmp_path / "s.zarr").records) == 5


def test_a_stop_ends_a_long_dwell_at_once(tmp_path: Path) -> None:
    class Dwelling(Control):
        def wait_for_stop(self, timeout_s: float) -> bool:
            self.ask_stop("by the test")  # what another thread does meanwhile
            return super().wait_for_stop(timeout_s)

    fakes = Fakes(control=Dwelling())
    capture = {**SCAN["capture"], "dwell_ms": 3_600_000.0}
    assert not conducted(fakes, tmp_path / "s.zarr", capture=capture)[0].run()
    assert fakes.captures == 1  # for the scaling, before the first point
    assert not fakes.on


def test_a_scan_that_fails_leaves_no_answer_behind_for_the_next_one(tmp_path: Path) -> None:
    class Odd(Fakes):
        def read_samples(self) -> Trace:
            if self.captures == 4:
                self.owed.remove("samples")
                raise ProtocolError("nonsense")
            return super().read_samples()

    fakes = Odd()
    with pytest.raises(ProtocolError):
        conducted(fakes, tmp_path / "s.zarr")[0].run()
    assert fakes.owed == []


def test_a_stop_while_the_first_point_is_approached_stops_the_stage(tmp_path: Path) -> None:
    class Slow(Fakes):
        def finish_move(self, timeout_s: float, cancelled: Any = None) -> dict[str, float]:
            raise Cancelled("ended by the test")

    fakes = Slow()
    with pytest.raises(Cancelled):
        conducted(fakes, tmp_path / "s.zarr")[0].run()
    assert "stop" in fakes.log


def test_a_way_to_the_first_point_through_a_keep_out_volume_is_not_gone(tmp_path: Path) -> None:
    fakes = Fakes(at={"x": 0.03, "z": 0.12})
    post = KeepOut(name="post", low_mm=(10, -5, 100), high_mm=(20, 5, 140))
    bench = load_bench("demo-tank").model_copy(update={"keep_out": (post,)})
    with pytest.raises(PlanRefused, match=r"element at 30, 0, 120 mm.*'post': drive the stage to a free place"):
        conducted(fakes, tmp_path / "s.zarr", bench)[0].run()
    assert not any(line.startswith("move") for line in fakes.log)


@pytest.mark.parametrize("since_s", [3600.0, 0.0, -7200.0], ids=["an hour's break", "no break", "clock set back"])
def test_the_clock_of_a_scan_goes_on_after_a_break_and_never_back(tmp_path: Path, since_s: float) -> None:
    store = tmp_path / "s.zarr"
    assert not conducted(Fakes(stop_after=4), store)[0].run()
    kept = [r.time_s for r in open_stored(store).records]
    began = datetime.fromisoformat(open_stored(store).attributes["started_utc"])
    assert began.utcoffset() == timedelta(0)
    assert abs((datetime.now(UTC) - began).total_seconds()) < 60
    earlier = (datetime.now(UTC) - timedelta(seconds=since_s)).isoformat()
    put_attributes(store, {"started_utc": earlier})
    assert conducted(Fakes(), store)[0].run(continue_store=True)
    whole = open_stored(store)
    times = [r.time_s for r in whole.records]
    assert len(times) == 5 > len(kept)
    assert times[: len(kept)] == kept
    assert all(a < b for a, b in pairwise(times))
    assert all(t >= since_s for t in times[len(kept) :])
    assert times[-1] < max(since_s, times[len(kept) - 1]) + 60
    assert whole.attributes["started_utc"] == earlier
    assert whole.judged()[1] == whole.changes
