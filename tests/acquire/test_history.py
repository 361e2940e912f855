"""What a late client still learns."""

from __future__ import annotations

import msgspec

from acquire.history import RECENT, History
from acquire.messages import Event, FindingChanged, Notice, Progress, ScanStarted, StateChanged

START = ScanStarted(
    name="s", scan_type="rotation", store="/s", planned_points=9, frequencies_hz=[1e6], axes_shown=["theta"],
    sensor="n", source="p",
)  # fmt: skip


def finding(code: str, action: str = "raised") -> FindingChanged:
    return msgspec.convert(
        {"type": "finding", "action": action, "at_point": 3, "finding": {"code": code}}, FindingChanged
    )


def filled(*events: Event, points: int = 0) -> History:
    history = History()
    for event in events:
        history.add(event, str(history.newest + 1).encode())
    for _ in range(points):
        history.add(msgspec.Raw(b""), str(history.newest + 1).encode())
    return history


def numbers(history: History, since: int = 1, most: int = 10**6) -> list[int]:
    return [int(data) for data in history.since(since, most)]


def test_recent_events_are_kept_whole_and_in_order() -> None:
    assert numbers(filled(START, points=20), since=5) == list(range(5, 22))


def test_no_more_than_asked_for_are_given() -> None:
    assert numbers(filled(START, points=20), since=5, most=3) == [5, 6, 7]


def test_a_finding_of_long_ago_is_not_lost() -> None:
    history = filled(START, finding("pivot.offset"), points=RECENT + 50)
    kept = numbers(history)
    assert kept[:2] == [1, 2]
    assert kept[2:] == list(range(history.oldest, history.newest + 1))
    assert history.oldest == history.newest - RECENT + 1


def test_the_last_word_of_a_finding_is_what_counts() -> None:
    history = filled(START, finding("a"), finding("b"), finding("a", "cleared"), points=RECENT)
    assert numbers(history)[:3] == [1, 3, 4]


def test_a_new_scan_forgets_the_findings_of_the_last_one() -> None:
    history = filled(START, finding("a"), StateChanged(state="preparing"), START, points=RECENT)
    assert numbers(history)[:2] == [3, 4]


def test_the_last_notices_are_kept_and_progress_is_not() -> None:
    history = filled(START, Progress(done=1, planned=2, elapsed_s=1, left_s=1), Notice(text="range"), points=RECENT)
    assert numbers(history)[:2] == [1, 3]


def test_nothing_was_sent_yet() -> None:
    assert numbers(History()) == []
    assert History().oldest == 1
