"""The same story in plain lines, for logs and pipes."""

from __future__ import annotations

from collections.abc import Iterable, Iterator

from acquire.live.panels import clock
from acquire.live.state import ViewState
from acquire.messages import Event, FindingChanged, Notice, Progress, ScanStarted, StateChanged

PROGRESS_STEP = 0.1


def told(events: Iterable[Event | None]) -> Iterator[str]:
    """Lines for each thing worth saying, until the scan has ended; progress about every tenth."""
    state = ViewState()
    said = 0.0
    for event in events:
        if event is None:
            continue
        state.take(event)
        match event:
            case ScanStarted():
                yield f"{event.name}: {event.planned_points} points, stored in {event.store}"
            case StateChanged():
                yield f"{event.state}{': ' + event.reason if event.reason else ''}"
            case Notice():
                yield event.text
            case Progress() if event.planned and event.done / event.planned >= said + PROGRESS_STEP:
                said = event.done / event.planned
                yield f"{event.done} of {event.planned} points, {clock(event.left_s)} left"
            case FindingChanged():
                yield from _finding(event)
        if state.ended:
            return


def _finding(event: FindingChanged) -> Iterator[str]:
    f = event.finding
    yield f"[{f['severity']}] {f['code']} {event.action} at point {event.at_point}: {f['summary']}"
    if event.action == "raised" and f["severity"] != "note":
        yield f"    so: {f['consequence']}"
        yield f"    do: {f['remedy']}"
