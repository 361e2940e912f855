"""A client beside a daemon that drops events, is replaced, or is none."""

from __future__ import annotations

from collections.abc import Callable, Iterator
from contextlib import contextmanager
from dataclasses import dataclass, field
from itertools import islice
from pathlib import Path
from threading import Event as Flag
from threading import Thread

import msgspec
import pytest
import zmq

from acquire.client import Client, DaemonReplaced, DaemonSilent, RequestRefused
from acquire.endpoint import events_endpoint
from acquire.messages import (
    PROTOCOL_VERSION,
    Done,
    EventEnvelope,
    Events,
    GetEvents,
    GetStatus,
    Notice,
    Refused,
    Reply,
    ReplyEnvelope,
    Request,
    RequestEnvelope,
    Status,
    Stop,
)

encode = msgspec.msgpack.encode


def envelope(number: int, daemon: str = "one") -> EventEnvelope:
    return EventEnvelope(daemon=daemon, number=number, body=Notice(text=str(number)))


@dataclass
class FakeDaemon:
    """Answers like a daemon that has sent `kept`, and sends what it is told to."""

    name: str = "one"
    kept: list[EventEnvelope] = field(default_factory=list)
    last: int = 0
    heard: list[Request] = field(default_factory=list)
    silent_to: type[Request] | None = None
    answer_to: Callable[[Request], Reply | bytes] | None = None
    publish: Callable[[bytes], object] = print  # until there is a socket

    def reply(self, request: Request) -> Reply | bytes:
        self.heard.append(request)
        if self.answer_to is not None:
            return self.answer_to(request)
        match request:
            case GetStatus():
                return Status(
                    bench="b", state="running", scan=None, store=None, done=0, planned=0, daemon=self.name,
                    last_event=self.last, source_on=False, identities={},
                )  # fmt: skip
            case GetEvents():
                return Events(oldest=1, events=[e for e in self.kept if e.number >= request.since])
        return Done(text="done")


@contextmanager
def daemon_at(folder: Path, fake: FakeDaemon) -> Iterator[Client]:
    endpoint = f"ipc://{folder / 'd'}"
    context = zmq.Context()
    requests, events = context.socket(zmq.ROUTER), context.socket(zmq.XPUB)
    requests.bind(endpoint)
    events.bind(events_endpoint(endpoint))
    over = Flag()

    def answering() -> None:
        while not over.is_set():
            if requests.poll(10):
                *route, frame = requests.recv_multipart()
                request = msgspec.msgpack.decode(frame, type=RequestEnvelope)
                if fake.silent_to is not None and isinstance(request.body, fake.silent_to):
                    continue
                reply = fake.reply(request.body)
                if not isinstance(reply, bytes):
                    reply = encode(ReplyEnvelope(number=request.number, body=reply))
                requests.send_multipart([*route, reply])

    thread = Thread(target=answering)
    thread.start()
    try:
        with Client(endpoint) as client:
            assert events.poll(2000)
            events.recv()  # it listens from now on
            fake.publish = events.send
            yield client
    finally:
        over.set()
        thread.join()
        context.destroy(linger=0)


def texts(client: Client, count: int) -> list[str]:
    found = (e.text for e in client.events() if isinstance(e, Notice))
    return list(islice(found, count))


def test_events_that_were_missed_are_asked_for_and_come_in_order(tmp_path: Path) -> None:
    fake = FakeDaemon(kept=[envelope(n) for n in range(1, 8)])
    with daemon_at(tmp_path, fake) as client:
        client.follow_from(1)
        fake.publish(encode(envelope(7)))  # the six before it were dropped on the way
        assert texts(client, 7) == list("1234567")


def test_an_event_that_comes_twice_is_told_once(tmp_path: Path) -> None:
    fake = FakeDaemon(kept=[envelope(1), envelope(2)])
    with daemon_at(tmp_path, fake) as client:
        client.follow_from(1)
        for n in (1, 2, 2, 3):
            fake.publish(encode(envelope(n)))
        fake.kept.append(envelope(3))
        assert texts(client, 3) == list("123")


def test_a_gap_that_the_daemon_no_longer_knows_is_skipped(tmp_path: Path) -> None:
    fake = FakeDaemon(kept=[envelope(1), envelope(50)])
    with daemon_at(tmp_path, fake) as client:
        client.follow_from(1)
        assert texts(client, 2) == ["1", "50"]


def test_events_lost_at_the_end_are_noticed_while_nothing_comes(tmp_path: Path) -> None:
    fake = FakeDaemon(kept=[envelope(1)])
    with daemon_at(tmp_path, fake) as client:
        client.follow_from(1)
        events = client.events()
        assert next(events) == Notice(text="1")
        fake.kept.append(envelope(2))
        fake.last = 2
        assert next(e for e in events if e is not None) == Notice(text="2")


def test_another_daemon_in_its_place_is_told_and_not_waited_for(tmp_path: Path) -> None:
    fake = FakeDaemon(kept=[envelope(1)], last=1)
    with daemon_at(tmp_path, fake) as client:
        client.follow_from(1)
        events = client.events()
        next(events)
        fake.name = "two"
        with pytest.raises(DaemonReplaced, match=r"was started anew.*run --continue STORE"):
            list(islice(events, 5))


def test_events_of_another_daemon_are_not_taken_for_the_first_ones(tmp_path: Path) -> None:
    fake = FakeDaemon(kept=[envelope(1)], last=1)
    with daemon_at(tmp_path, fake) as client:
        client.follow_from(1)
        events = client.events()
        next(events)
        fake.publish(encode(envelope(2, "two")))
        with pytest.raises(DaemonReplaced):
            next(events)


def test_the_reply_to_a_request_that_was_broken_off_answers_nothing_else(tmp_path: Path) -> None:
    fake = FakeDaemon()
    with daemon_at(tmp_path, fake) as client:
        with pytest.raises(DaemonSilent):
            client.ask(GetStatus(), timeout_s=0.0)  # the reply comes all the same, later
        assert client.do(Stop()) == "done"
        assert client.status().daemon == "one"


def test_a_daemon_that_does_not_answer_is_told_with_the_cure(tmp_path: Path) -> None:
    with (
        daemon_at(tmp_path, FakeDaemon(silent_to=Stop)) as client,
        pytest.raises(DaemonSilent, match=r"no daemon answers at ipc://.*truepivot serve BENCH"),
    ):
        client.ask(Stop(), timeout_s=0.2)


def test_a_refusal_is_passed_on(tmp_path: Path) -> None:
    with (
        daemon_at(tmp_path, FakeDaemon(answer_to=lambda _: Refused(text="not now"))) as client,
        pytest.raises(RequestRefused, match="not now"),
    ):
        client.do(Stop())


@pytest.mark.parametrize("garbage", [b"", b"hello", encode({"version": PROTOCOL_VERSION, "body": 3})])
def test_what_is_no_daemon_is_told_in_one_line(tmp_path: Path, garbage: bytes) -> None:
    with (
        daemon_at(tmp_path, FakeDaemon(answer_to=lambda _: garbage)) as client,
        pytest.raises(DaemonSilent, match="is no daemon of this version"),
    ):
        client.status()


def test_garbage_among_the_events_is_told_in_one_line(tmp_path: Path) -> None:
    fake = FakeDaemon()
    with daemon_at(tmp_path, fake) as client:
        client.follow_from(1)
        fake.publish(b"\xc1")
        with pytest.raises(DaemonSilent, match="is no daemon of this version"):
            list(islice(client.events(), 3))
