"""The whole live view, and the loop that keeps it on the terminal while a scan runs."""

from __future__ import annotations

from collections.abc import Iterable
from time import monotonic

from rich.console import Console, RenderableType
from rich.layout import Layout
from rich.live import Live

from acquire.live.panels import findings, head, pattern, raster_map, spectrum, waveform
from acquire.live.state import ViewState
from acquire.messages import Event

REDRAW_S = 0.2
MARGIN = 16  # frame, labels and padding of a panel, in characters
FRAME = 4  # frame, x labels, legend of a panel, in lines


def whole(state: ViewState, width: int, height: int) -> RenderableType:
    """The screen: head on top, waveform and spectrum, then the pattern or map beside the findings."""
    half = max(20, width // 2 - MARGIN)
    upper = max(4, (height - 1) * 2 // 5 - FRAME)
    lower = max(4, (height - 1) - (upper + FRAME) - FRAME - 1)
    layout = Layout()
    layout.split_column(
        Layout(head(state), size=1),
        Layout(name="signals", size=upper + FRAME),
        Layout(name="result"),
    )
    layout["signals"].split_row(Layout(waveform(state, half, upper)), Layout(spectrum(state, half, upper)))
    scan_type = state.started.scan_type if state.started else None
    rotating = scan_type == "rotation"
    picture = pattern(state, half, lower) if rotating else raster_map(state, half + 6, lower + 1)
    layout["result"].split_row(Layout(picture), Layout(findings(state)))
    return layout


def show(events: Iterable[Event | None], console: Console) -> ViewState:
    """Draw until the scan has ended; returns what was seen. A wait without events is fine."""
    state = ViewState()
    drawn = 0.0
    with Live(console=console, screen=True, auto_refresh=False) as live:
        for event in events:
            if event is not None:
                state.take(event)
            now = monotonic()
            if now - drawn >= REDRAW_S or state.ended:
                live.update(whole(state, console.width, console.height), refresh=True)
                drawn = now
            if state.ended:
                break
    return state
