"""Messages between the daemon and its clients: typed, versioned, and numbered where they can be missed.

A client sends one `Request` and gets one `Reply`. The daemon publishes `Event`s; each carries the number that
follows the one before it, so a client that sees a gap asks for the missing ones (`GetEvents`).
"""

from __future__ import annotations

from typing import Any, Literal

import msgspec

PROTOCOL_VERSION = 2

ScanState = Literal["idle", "preparing", "running", "held", "stopping", "sealed", "broken-off", "failed"]


class Message(msgspec.Struct, frozen=True, tag_field="type", kw_only=True):
    """Common base; the tag names the type on the wire."""


# --- requests ---------------------------------------------------------------------------------------------


class RunScan(Message, frozen=True, kw_only=True, tag="run"):
    """Start a scan. The profiles travel resolved, as mappings, so that both sides see the same ones."""

    scan: dict[str, Any]
    sensor: dict[str, Any]
    source: dict[str, Any]
    store: str
    continue_store: bool = False


class Hold(Message, frozen=True, kw_only=True, tag="hold"):
    """Wait after the point in hand; the source is switched off while waiting."""


class Resume(Message, frozen=True, kw_only=True, tag="resume"):
    """Go on after a hold."""


class Stop(Message, frozen=True, kw_only=True, tag="stop"):
    """Break the scan off; what was stored stays."""


class GetStatus(Message, frozen=True, kw_only=True, tag="status"):
    """Ask how things stand."""


class GetEvents(Message, frozen=True, kw_only=True, tag="events"):
    """Ask for past events from number `since` on."""

    since: int


class Shutdown(Message, frozen=True, kw_only=True, tag="shutdown"):
    """Leave the bench safe and end the daemon."""


Request = RunScan | Hold | Resume | Stop | GetStatus | GetEvents | Shutdown


class RequestEnvelope(msgspec.Struct, frozen=True, kw_only=True):
    """What crosses the wire from a client; the reply carries the same number."""

    version: int = PROTOCOL_VERSION
    number: int = 0
    body: Request


# --- events -----------------------------------------------------------------------------------------------


class ScanStarted(Message, frozen=True, kw_only=True, tag="scan-started"):
    """A scan begins: what a live view needs to draw it."""

    name: str
    scan_type: Literal["rotation", "raster"]
    store: str
    planned_points: int
    frequencies_hz: list[float]
    axes_shown: list[str]
    sensor: str
    source: str


class StateChanged(Message, frozen=True, kw_only=True, tag="state"):
    """The scan changed state; `reason` says why in one line."""

    state: ScanState
    reason: str = ""


class PointsStored(Message, frozen=True, kw_only=True, tag="stored"):
    """Points up to and including `last` are durable on disk."""

    last: int
    count: int


class PointSeen(Message, frozen=True, kw_only=True, tag="point"):
    """A point was reduced: the numbers a live view shows."""

    index: int
    reference: bool
    plane: int
    pose: tuple[float, float, float, float, float]
    time_s: float
    temperature_c: float
    amplitudes_v: list[float]
    peak_v: float
    trough_v: float
    square_integral_v2s: float
    range_use: float


class WaveformSeen(Message, frozen=True, kw_only=True, tag="waveform"):
    """A thinned picture of the latest waveform and spectrum (about 400 values each); sent now and then."""

    index: int
    start_s: float
    interval_s: float
    low_v: list[float]
    high_v: list[float]
    spectrum_step_hz: float
    spectrum_db: list[float]


class FindingChanged(Message, frozen=True, kw_only=True, tag="finding"):
    """A finding was raised, updated or cleared. `finding` is `checks.finding.Finding` as a mapping."""

    action: Literal["raised", "updated", "cleared"]
    at_point: int
    finding: dict[str, Any]


class Progress(Message, frozen=True, kw_only=True, tag="progress"):
    """How far the scan is and how long it will still take."""

    done: int
    planned: int
    elapsed_s: float
    left_s: float


class Notice(Message, frozen=True, kw_only=True, tag="notice"):
    """One line for the operator: what the daemon does beside the points (autorange, homing, cautions)."""

    text: str


Event = ScanStarted | StateChanged | PointsStored | PointSeen | WaveformSeen | FindingChanged | Progress | Notice


class EventEnvelope(msgspec.Struct, frozen=True, kw_only=True):
    """An event with its number, counted from 1 since that daemon started."""

    version: int = PROTOCOL_VERSION
    daemon: str
    number: int
    body: Event


# --- replies ----------------------------------------------------------------------------------------------


class Done(Message, frozen=True, kw_only=True, tag="done"):
    """The request was carried out or accepted."""

    text: str = ""


class Refused(Message, frozen=True, kw_only=True, tag="refused"):
    """It was not; `text` is one line with the cure."""

    text: str


class Status(Message, frozen=True, kw_only=True, tag="status-reply"):
    """How things stand."""

    bench: str
    state: ScanState
    scan: str | None
    store: str | None
    done: int
    planned: int
    daemon: str
    last_event: int
    source_on: bool
    identities: dict[str, str]


class Events(Message, frozen=True, kw_only=True, tag="events-reply"):
    """Past events. From number `oldest` on all are kept; of those before, the ones that still matter."""

    oldest: int
    events: list[EventEnvelope]


Reply = Done | Refused | Status | Events


class ReplyEnvelope(msgspec.Struct, frozen=True, kw_only=True):
    """What crosses the wire to a client: the reply to its request of that number."""

    version: int = PROTOCOL_VERSION
    number: int = 0
    body: Reply
