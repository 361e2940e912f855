"""The daemon: listens for requests, numbers events, and hands scans to the thread that owns the instruments."""

from __future__ import annotations

import signal
from collections.abc import Callable, Iterator
from contextlib import ExitStack, contextmanager
from pathlib import Path
from queue import Empty
from types import FrameType
from uuid import uuid4

import msgspec
import zmq

from acquire.bench_thread import BenchThread
from acquire.endpoint import NoEndpoint, checked, events_endpoint, lock_of, runtime_folder
from acquire.history import History
from acquire.messages import (
    PROTOCOL_VERSION,
    Done,
    Event,
    EventEnvelope,
    Events,
    GetEvents,
    GetStatus,
    Hold,
    Refused,
    Reply,
    ReplyEnvelope,
    Request,
    RequestEnvelope,
    Resume,
    RunScan,
    Shutdown,
    Status,
    Stop,
)
from acquire.ownership import OwnedByAnother, held, held_instruments
from acquire.prepare import Job
from profiles.bench import Bench
from profiles.errors import ProfileError
from profiles.fitting import misfits
from profiles.instrument import Instrument
from profiles.load import validate
from profiles.references import instruments_of
from profiles.scan import Scan
from profiles.sensor import Sensor
from profiles.source import Source

MOST_EVENTS = 2_000  # in one reply
QUEUE_MARK = 20_000
LOOK_MS = 20
OPENING_S = 30.0
BUSY = ("preparing", "running", "held", "stopping")


class Numbered(msgspec.Struct, frozen=True, kw_only=True):
    """An `EventEnvelope` as it is sent: events of the recorder arrive encoded and stay so."""

    version: int = PROTOCOL_VERSION
    daemon: str
    number: int
    body: Event | msgspec.Raw


class BenchUnusable(Exception):
    """The bench cannot be opened, or was lost; one line with the cure."""


class Daemon:
    """State of the daemon; `answer` is what a request does, apart from any socket."""

    def __init__(self, bench: Bench, thread: BenchThread, scope: Instrument) -> None:
        self._bench = bench
        self._scope = scope
        self._thread = thread
        self._history = History()
        self._me = uuid4().hex  # so that a client sees when another daemon has taken this one's place
        self.ended = False

    def numbered(self, event: Event | msgspec.Raw) -> bytes:
        """The event with the next number, encoded, and kept for clients that missed it."""
        data = encode(Numbered(daemon=self._me, number=self._history.newest + 1, body=event))
        self._history.add(event, data)
        return data

    def answer(self, request: Request) -> Reply:
        """Carry a request out."""
        control, busy = self._thread.control, self._thread.state in BUSY
        match request:
            case RunScan():
                return self._run(request)
            case GetStatus():
                return self._status()
            case GetEvents():
                return self._events(request.since)
            case Shutdown():
                self.ended = True
                return Done(text="the daemon ends and leaves the bench safe")
            case Hold() if busy:
                control.ask_hold("by the operator")
                return Done(text="holding after the point in hand; the source is switched off")
            case Resume() if self._thread.state == "held":
                control.ask_resume()
                return Done(text="going on")
            case Stop() if busy:
                control.ask_stop("by the operator")
                return Done(text="stopping; what was stored stays")
        return Refused(text=f"nothing to {type(request).__name__.lower()}: the daemon is {self._thread.state}")

    def _run(self, request: RunScan) -> Reply:
        if self._thread.state in BUSY:
            return Refused(text="a scan is running: wait for it, or stop it with: truepivot stop")
        try:
            scan = validate(request.scan, "scan", "scan")
            sensor = validate(request.sensor, "sensor", "sensor")
            source = validate(request.source, "source", "source")
        except ProfileError as error:
            return Refused(text=str(error))
        if not (isinstance(scan, Scan) and isinstance(sensor, Sensor) and isinstance(source, Source)):
            return Refused(text="the profiles are of the wrong kind")
        problems = misfits(scan, self._bench, sensor, source, self._scope)
        if problems:
            return Refused(text="\n".join(problems))
        store = Path(request.store)
        if store.exists() != request.continue_store:
            told = "does not exist, so it cannot be continued" if request.continue_store else "exists already"
            return Refused(text=f"{store} {told}: choose another store")
        self._thread.ask(Job(self._bench, sensor, source, scan), store, request.continue_store)
        return Done(text=str(store))

    def _status(self) -> Status:
        done, planned, source_on = self._thread.progress()
        job, store = self._thread.job, self._thread.store
        return Status(
            bench=self._bench.name,
            state=self._thread.state,
            scan=job.scan.name if job else None,
            store=str(store) if store else None,
            done=done,
            planned=planned,
            daemon=self._me,
            last_event=self._history.newest,
            source_on=source_on,
            identities=self._thread.identities,
        )

    def _events(self, since: int) -> Events:
        kept = self._history.since(since, MOST_EVENTS)
        return Events(oldest=self._history.oldest, events=[decode_event(data) for data in kept])


encode = msgspec.msgpack.Encoder().encode
decode_request = msgspec.msgpack.Decoder(RequestEnvelope).decode
decode_event = msgspec.msgpack.Decoder(EventEnvelope).decode


def answered(daemon: Daemon, frame: bytes) -> bytes:
    """What goes back for a frame that came; one that is no request of this version is told so."""
    try:
        request = decode_request(frame)
    except msgspec.MsgspecError as error:
        text = f"the request was not understood ({error}): are client and daemon of one version?"
        return encode(ReplyEnvelope(body=Refused(text=text)))
    if request.version != PROTOCOL_VERSION:
        text = f"the client speaks version {request.version}, the daemon {PROTOCOL_VERSION}: update"
        return encode(ReplyEnvelope(number=request.number, body=Refused(text=text)))
    return encode(ReplyEnvelope(number=request.number, body=daemon.answer(request.body)))


def serve(bench: Bench, endpoint: str, ready: Callable[[dict[str, str]], None]) -> None:
    """Own the bench until a signal or a `Shutdown`; `ready` is called with the identities once it answers.

    Raises:
        BenchUnusable: the instruments cannot be opened, or were not left safe.
        ProfileError: a profile of an instrument is missing, wrong, or of another role.
        NoEndpoint: the endpoint cannot be used, or another daemon has it.
    """
    profiles = instruments_of(bench)
    with sole_owner(bench, checked(endpoint)), sockets(endpoint) as (requests, events), ending_signals() as signalled:
        thread = BenchThread(bench, profiles)
        daemon = Daemon(bench, thread, profiles["oscilloscope"])
        thread.start()
        try:
            thread.ready.wait(OPENING_S)
            if thread.failed is None:
                ready(thread.identities)
            while not (daemon.ended or signalled() or thread.failed):
                listen(daemon, thread, requests, events)
        finally:
            thread.end("the daemon was ended")
            while thread.is_alive():
                thread.join(LOOK_MS / 1e3)
                send_events(daemon, thread, events)
        if thread.failed:
            raise BenchUnusable(thread.failed)


def listen(daemon: Daemon, thread: BenchThread, requests: zmq.Socket[bytes], events: zmq.Socket[bytes]) -> None:
    """Send what is to be published, answer one request if there is any."""
    send_events(daemon, thread, events)
    if not requests.poll(LOOK_MS):
        return
    parts = requests.recv_multipart()
    requests.send_multipart([*parts[:-1], answered(daemon, parts[-1])])


def send_events(daemon: Daemon, thread: BenchThread, events: zmq.Socket[bytes]) -> None:
    """Publish all that waits; a slow client loses events and asks for them by number."""
    while True:
        try:
            event = thread.events.get_nowait()
        except Empty:
            return
        events.send(daemon.numbered(event))


@contextmanager
def sockets(endpoint: str) -> Iterator[tuple[zmq.Socket[bytes], zmq.Socket[bytes]]]:
    """The two bound sockets; closed without lingering."""
    context = zmq.Context()
    requests, events = context.socket(zmq.ROUTER), context.socket(zmq.PUB)
    try:
        events.set_hwm(QUEUE_MARK)
        for socket in (requests, events):
            socket.linger = 200
        try:
            requests.bind(endpoint)
            events.bind(events_endpoint(endpoint))
        except zmq.ZMQError as error:
            raise NoEndpoint(f"cannot answer at {endpoint} ({error}): is another daemon there?") from error
        yield requests, events
    finally:
        requests.close()
        events.close()
        context.term()
        for name in (endpoint, events_endpoint(endpoint)):
            if name.startswith("ipc://"):
                Path(name.removeprefix("ipc://")).unlink(missing_ok=True)


@contextmanager
def sole_owner(bench: Bench, endpoint: str) -> Iterator[None]:
    """Refuse a second daemon at the same endpoint, where binding would silently take it over, or on the same bench.

    Raises:
        NoEndpoint: another daemon answers there.
        BenchUnusable: another daemon has one of the instruments.
    """
    owner = f"the daemon at {endpoint}"
    addresses = [attached.address for attached in bench.instruments.values()]
    with ExitStack() as stack:
        try:
            if lock := lock_of(endpoint):
                stack.enter_context(held(lock, f"the endpoint {endpoint}", owner))
        except OwnedByAnother as error:
            raise NoEndpoint(f"a daemon answers at {endpoint} already") from error
        try:
            stack.enter_context(held_instruments(addresses, runtime_folder(), owner))
        except OwnedByAnother as error:
            raise BenchUnusable(str(error)) from error
        yield


@contextmanager
def ending_signals() -> Iterator[Callable[[], bool]]:
    """SIGINT and SIGTERM set a flag; more of them change nothing, so that the bench is always left safe."""
    seen: list[int] = []

    def note(number: int, _: FrameType | None) -> None:
        seen.append(number)

    before = {number: signal.signal(number, note) for number in (signal.SIGINT, signal.SIGTERM)}
    try:
        yield lambda: bool(seen)
    finally:
        for number, handler in before.items():
            signal.signal(number, handler)
