"""What a client does with a scan: ask for it, follow it, stop it on Ctrl-C."""

from __future__ import annotations

import sys
from collections.abc import Iterable, Iterator
from pathlib import Path

from acquire.client import Client
from acquire.header import read_attributes
from acquire.live.lines import told
from acquire.live.state import ViewState
from acquire.messages import Event, RunScan, Stop
from profiles.load import load_scan, load_sensor, load_source
from profiles.scan import PivotCorrection


def new_request(scan: str, store: Path, pivot: PivotCorrection | None = None) -> RunScan:
    """A request with the scan's profiles, and another pivot correction where one is given.

    Raises:
        ProfileError: what is wrong with a profile.
    """
    profile = load_scan(scan)
    if pivot is not None:
        profile = profile.model_copy(update={"pivot": pivot})
    return RunScan(
        scan=profile.model_dump(mode="json"),
        sensor=load_sensor(profile.sensor).model_dump(mode="json"),
        source=load_source(profile.source).model_dump(mode="json"),
        store=str(store.absolute()),
    )


def stored_request(stored: Path, store: Path, continue_store: bool = False) -> RunScan:
    """A request for the scan of a store, exactly as it was done.

    Raises:
        ValueError: it is no store.
    """
    profiles = read_attributes(stored)["profiles"]
    return RunScan(
        scan=profiles["scan"],
        sensor=profiles["sensor"],
        source=profiles["source"],
        store=str(store.absolute()),
        continue_store=continue_store,
    )


def continue_request(store: Path) -> RunScan:
    """A request to go on with a store that was broken off."""
    return stored_request(store, store, continue_store=True)


def start(client: Client, request: RunScan) -> None:
    """Ask for the scan; its events are followed from here on."""
    client.follow_from(client.status().last_event + 1)
    client.ask(request)


def end_of(client: Client, live: bool) -> ViewState:
    """Follow the scan to its end, on the screen or in lines; Ctrl-C stops the scan and sees it end."""
    state = ViewState()

    def noted(events: Iterator[Event | None]) -> Iterator[Event | None]:
        while True:
            try:
                event = next(events)
            except KeyboardInterrupt:
                sys.stderr.write("stopping the scan; what was stored stays\n")
                client.ask(Stop())
                events = client.events()
                continue
            if event is not None:
                state.take(event)
            yield event

    draw(noted(client.events()), live)
    return state


def draw(events: Iterable[Event | None], live: bool) -> None:
    """Show events until the scan has ended."""
    if live:
        from rich.console import Console

        from acquire.live.screen import show

        show(events, Console())
        return
    for line in told(events):
        sys.stdout.write(line + "\n")
        sys.stdout.flush()


def look(client: Client) -> None:
    """Watch the scan that runs, from its beginning where the daemon still knows it; Ctrl-C only ends the watching."""
    client.follow_from(1)
    try:
        draw(latest_scan(client), sys.stdout.isatty())
    except KeyboardInterrupt:
        sys.stderr.write("no longer watching; the scan goes on\n")


def latest_scan(client: Client) -> Iterator[Event | None]:
    """Events of the scan that runs or, when none does, of the next one."""
    from acquire.messages import ScanStarted

    running = client.status().state in ("running", "held", "stopping")
    past: list[Event] = []
    events = client.events()
    for event in events:
        if event is None:
            break
        if isinstance(event, ScanStarted):
            past.clear()
        past.append(event)
    yield from past if running else []
    yield from events
