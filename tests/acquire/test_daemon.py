"""What the daemon says to requests, without a socket; and that a fault of its own never leaves it answering on."""

from __future__ import annotations

from pathlib import Path
from typing import Any, cast

import msgspec
import pytest

from acquire import bench_thread
from acquire.bench_thread import BenchThread
from acquire.daemon import BenchUnusable, Daemon, answered, serve, sole_owner
from acquire.endpoint import NoEndpoint, only_endpoint, runtime_folder
from acquire.follow import new_request
from acquire.messages import (
    Done,
    Event,
    GetEvents,
    GetStatus,
    Hold,
    Notice,
    Refused,
    Reply,
    ReplyEnvelope,
    Request,
    RequestEnvelope,
    Resume,
    RunScan,
    ScanState,
    Shutdown,
    Status,
    Stop,
)
from drivers.errors import DriverError
from profiles.load import load_bench
from profiles.references import instruments_of

BENCH = load_bench("demo-tank")
PROFILES = instruments_of(BENCH)


def idle_thread(state: ScanState = "idle") -> BenchThread:
    thread = BenchThread(BENCH, PROFILES)
    thread.state = state
    return thread


def daemon(state: ScanState = "idle") -> tuple[Daemon, BenchThread]:
    thread = idle_thread(state)
    return Daemon(BENCH, thread, PROFILES["oscilloscope"]), thread


def said(frame: bytes) -> Reply:
    return msgspec.msgpack.decode(answered(daemon()[0], frame), type=ReplyEnvelope).body


def wanted(store: Path, **changes: Any) -> RunScan:
    return msgspec.structs.replace(new_request("demo-rotation-fast", store), **changes)


@pytest.mark.parametrize("frame", [b"", b"hello", msgspec.msgpack.encode({"version": 2, "body": {"type": "fly"}})])
def test_what_is_no_request_is_refused_in_one_line(frame: bytes) -> None:
    reply = said(frame)
    assert isinstance(reply, Refused)
    assert "are client and daemon of one version?" in reply.text
    assert "\n" not in reply.text


def test_a_client_of_another_version_is_told_both() -> None:
    reply = said(msgspec.msgpack.encode(RequestEnvelope(version=99, body=GetStatus())))
    assert isinstance(reply, Refused)
    assert "version 99" in reply.text


def test_a_reply_carries_the_number_of_its_request() -> None:
    frame = msgspec.msgpack.encode(RequestEnvelope(number=7, body=GetStatus()))
    assert msgspec.msgpack.decode(answered(daemon()[0], frame), type=ReplyEnvelope).number == 7


@pytest.mark.parametrize(
    ("request_", "state"), [(Hold(), "idle"), (Stop(), "sealed"), (Resume(), "running"), (Resume(), "failed")]
)
def test_what_cannot_be_done_now_is_refused_with_the_state(request_: Request, state: ScanState) -> None:
    reply = daemon(state)[0].answer(request_)
    assert isinstance(reply, Refused)
    assert f"the daemon is {state}" in reply.text


def test_hold_resume_and_stop_reach_the_scan() -> None:
    one, thread = daemon("running")
    assert isinstance(one.answer(Hold()), Done)
    assert thread.control.hold_asked()
    thread.state = "held"
    assert isinstance(one.answer(Resume()), Done)
    assert not thread.control.hold_asked()
    assert isinstance(one.answer(Stop()), Done)
    assert thread.control.stop_asked()


def test_a_shutdown_ends_it() -> None:
    one, _ = daemon()
    assert isinstance(one.answer(Shutdown()), Done)
    assert one.ended


def test_a_scan_is_handed_to_the_bench_and_a_second_one_waits_its_turn(tmp_path: Path) -> None:
    one, thread = daemon()
    assert one.answer(wanted(tmp_path / "a.zarr")) == Done(text=str(tmp_path / "a.zarr"))
    assert thread.state == "preparing"
    assert one.answer(wanted(tmp_path / "b.zarr")) == Refused(
        text="a scan is running: wait for it, or stop it with: truepivot stop"
    )


def test_a_scan_with_wrong_profiles_is_refused_with_every_problem(tmp_path: Path) -> None:
    one, thread = daemon()
    request = wanted(tmp_path / "a.zarr")
    request.scan["capture"]["averages"] = 0
    request.scan["speed"] = "high"
    reply = one.answer(request)
    assert isinstance(reply, Refused)
    assert "capture.averages" in reply.text
    assert "speed" in reply.text
    assert thread.state == "idle"


def test_a_profile_of_another_kind_is_refused(tmp_path: Path) -> None:
    request = wanted(tmp_path / "a.zarr")
    assert isinstance(daemon()[0].answer(wanted(tmp_path / "a.zarr", sensor=request.source)), Refused)


@pytest.mark.parametrize(("exists", "told"), [(True, "exists already"), (False, "does not exist")])
def test_a_store_is_made_or_continued_never_overwritten(tmp_path: Path, exists: bool, told: str) -> None:
    store = tmp_path / "a.zarr"
    if exists:
        store.mkdir()
    reply = daemon()[0].answer(wanted(store, continue_store=not exists))
    assert isinstance(reply, Refused)
    assert told in reply.text


def test_events_are_numbered_from_one_and_can_be_asked_for() -> None:
    one, _ = daemon()
    for n in range(4):
        one.numbered(Notice(text=str(n)))
    reply = one.answer(GetEvents(since=3))
    assert [e.number for e in cast(Any, reply).events] == [3, 4]
    status = one.answer(GetStatus())
    assert isinstance(status, Status)
    assert status.last_event == 4


def test_two_daemons_are_not_taken_for_one_another() -> None:
    first, second = (cast(Status, daemon()[0].answer(GetStatus())).daemon for _ in range(2))
    assert first != second


# --- one daemon at a bench ----------------------------------------------------------------------------------


@pytest.fixture
def own_runtime(monkeypatch: pytest.MonkeyPatch, tmp_path: Path) -> Path:
    monkeypatch.setenv("XDG_RUNTIME_DIR", str(tmp_path))
    return tmp_path


@pytest.mark.usefixtures("own_runtime")
def test_a_second_daemon_on_the_same_bench_at_another_endpoint_is_refused(tmp_path: Path) -> None:
    with (
        sole_owner(BENCH, f"ipc://{tmp_path}/a"),
        pytest.raises(BenchUnusable, match=r"the instrument at .* belongs to the daemon at ipc://.*/a already"),
        sole_owner(BENCH, f"ipc://{tmp_path}/b"),
    ):
        pytest.fail("two owners")


@pytest.mark.usefixtures("own_runtime")
def test_a_socket_that_a_killed_daemon_left_does_not_count() -> None:
    folder = runtime_folder()
    folder.mkdir(parents=True)
    (folder / "gone.socket").touch()
    (folder / "gone.socket.lock").touch()
    with pytest.raises(NoEndpoint, match="no daemon runs here"):
        only_endpoint()
    here = f"ipc://{folder / 'here.socket'}"
    (folder / "here.socket").touch()
    with sole_owner(BENCH, here):
        assert only_endpoint() == here


# --- faults of its own --------------------------------------------------------------------------------------


@pytest.mark.usefixtures("own_runtime")
def test_a_fault_of_its_own_ends_the_daemon_with_one_line(
    monkeypatch: pytest.MonkeyPatch, tmp_path: Path, capsys: pytest.CaptureFixture[str]
) -> None:
    def broken(*_: Any) -> Any:
        raise ZeroDivisionError("a fault")

    monkeypatch.setattr(bench_thread, "open_instruments", broken)
    with pytest.raises(BenchUnusable, match=r"a fault of truepivot itself \(ZeroDivisionError: a fault\)"):
        serve(BENCH, f"ipc://{tmp_path}/d", lambda _: None)
    assert "ZeroDivisionError" in capsys.readouterr().err


class BrokenConductor:
    """Raises what it is told to, once it runs."""

    error: Exception = ZeroDivisionError("a fault")

    def __init__(self, *_: Any) -> None:
        self.done = self.planned = 0
        self.source_on = False

    def run(self, continue_store: bool) -> bool:
        raise self.error


class Nothing:
    """No instruments."""

    generator: Any = None
    scope = stage = thermometer = None


class UnreachableLink:
    in_step = False


class Unreachable:
    link = UnreachableLink()

    def recover(self) -> None:
        raise DriverError("the generator does not answer")


class SilentGenerator(Nothing):
    generator = Unreachable()


def last_event(thread: BenchThread) -> Event:
    event: Any = None
    while not thread.events.empty():
        event = thread.events.get()
    return cast(Event, event)


@pytest.mark.parametrize(
    ("instruments", "told"),
    [(Nothing(), "a fault of truepivot itself (ZeroDivisionError: a fault)"), (SilentGenerator(), "does not answer")],
)
def test_a_scan_that_fails_in_whatever_way_leaves_the_daemon_ready_for_the_next(
    monkeypatch: pytest.MonkeyPatch, tmp_path: Path, instruments: Any, told: str
) -> None:
    monkeypatch.setattr(bench_thread, "Conductor", BrokenConductor)
    thread = idle_thread()
    thread.ask(cast(Any, None), tmp_path / "s.zarr", continue_store=False)
    thread._serve_one(instruments)
    assert thread.state == "failed"
    assert told in cast(Any, last_event(thread)).reason
    assert thread.failed is None
