import threading
import time

import pytest

from acquire.channel import Channel, channel_pair

FRAME = b"x" * 1000
MANY = 2000  # far more than the system keeps for a pipe


def pair() -> tuple[Channel, Channel]:
    ours, theirs = channel_pair()
    return ours, Channel(theirs)


def test_telling_does_not_wait_for_a_side_that_does_not_read() -> None:
    """Would it wait, this test would not end."""
    ours, theirs = pair()
    for i in range(MANY):
        ours.tell(i.to_bytes(4, "big") + FRAME)
    reader = threading.Thread(target=ours.flush)
    reader.start()
    assert [int.from_bytes(theirs.receive()[:4], "big") for _ in range(MANY)] == list(range(MANY))
    reader.join()
    ours.close()
    theirs.close()


def test_waiting_for_input_sends_what_is_left() -> None:
    ours, theirs = pair()
    for _ in range(MANY):
        ours.tell(FRAME)
    waiting = threading.Thread(target=ours.ready, args=(30.0,))
    waiting.start()
    assert all(theirs.receive() == FRAME for _ in range(MANY))
    theirs.send(b"answer")
    waiting.join()
    assert ours.receive() == b"answer"
    ours.close()
    theirs.close()


def test_a_side_that_is_gone_is_told_nothing_and_what_it_sent_is_still_read() -> None:
    ours, theirs = pair()
    for i in range(5):
        theirs.send(bytes([i]))
    theirs.close()
    for _ in range(MANY):
        ours.tell(FRAME)
    ours.flush()
    assert [ours.receive() for _ in range(5)] == [bytes([i]) for i in range(5)]
    assert ours.ready()
    with pytest.raises((EOFError, OSError)):
        ours.receive()
    ours.close()


def test_it_waits_no_longer_than_asked_with_something_left_to_send() -> None:
    ours, theirs = pair()
    for _ in range(MANY):
        ours.tell(FRAME)
    begun = time.monotonic()
    assert not ours.ready(0.05)
    assert time.monotonic() - begun >= 0.05
    ours.close()
    theirs.close()
