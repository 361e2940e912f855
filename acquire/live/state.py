"""What the live view knows, built from events alone: no terminal, no sockets."""

from __future__ import annotations

from collections.abc import Mapping
from dataclasses import dataclass, field
from math import log10
from typing import Any

from acquire.messages import (
    Event,
    FindingChanged,
    Notice,
    PointSeen,
    PointsStored,
    Progress,
    ScanStarted,
    ScanState,
    StateChanged,
    WaveformSeen,
)

NOTICES_KEPT = 4
POINTS_DRAWN = 4000
NOTHING_YET = Progress(done=0, planned=0, elapsed_s=0.0, left_s=0.0)
ENDED: tuple[ScanState, ...] = ("sealed", "broken-off", "failed")


@dataclass
class ViewState:
    """The scan as a viewer sees it."""

    started: ScanStarted | None = None
    state: ScanState = "idle"
    reason: str = ""
    progress: Progress = NOTHING_YET
    stored: int = 0
    points: list[PointSeen] = field(default_factory=list)
    waveform: WaveformSeen | None = None
    findings: dict[str, Mapping[str, Any]] = field(default_factory=dict)
    notices: list[str] = field(default_factory=list)
    reference_sums: list[float] = field(default_factory=list)
    references: int = 0

    def take(self, event: Event) -> None:
        """Fold one event in."""
        match event:
            case ScanStarted():
                notices = self.notices
                self.__init__()  # type: ignore[misc]  # a new scan starts from nothing
                self.started = event
                self.notices = notices
            case StateChanged():
                self.state, self.reason = event.state, event.reason
            case Progress():
                self.progress = event
            case PointsStored():
                self.stored = event.last + 1
            case PointSeen():
                self.points.append(event)
                if event.reference:
                    sums = self.reference_sums or [0.0] * len(event.amplitudes_v)
                    self.reference_sums = [s + a for s, a in zip(sums, event.amplitudes_v, strict=True)]
                    self.references += 1
            case WaveformSeen():
                self.waveform = event
            case FindingChanged():
                code = event.finding["code"]
                if event.action == "cleared":
                    self.findings.pop(code, None)
                else:
                    self.findings[code] = event.finding
            case Notice():
                self.notices = [*self.notices, event.text][-NOTICES_KEPT:]

    @property
    def ended(self) -> bool:
        """Whether the scan is over, however it ended."""
        return self.state in ENDED

    def reference_amplitudes(self) -> list[float]:
        """Mean amplitude at each comb line over the reference points so far; empty before the first."""
        return [s / self.references for s in self.reference_sums]

    def shown(self) -> list[PointSeen]:
        """The points, thinned evenly so that drawing does not slow down as a long scan grows."""
        return self.points[:: 1 + len(self.points) // POINTS_DRAWN]

    def pattern(self, line: int) -> tuple[list[float], list[float]]:
        """Angles (rad) and levels (dB re the reference points) at comb line number `line`."""
        reference = self.reference_amplitudes()
        if not reference or reference[line] <= 0:
            return [], []
        angles, levels = [], []
        for p in self.shown():
            if p.amplitudes_v[line] > 0:
                angles.append(p.pose[3])
                levels.append(20 * log10(p.amplitudes_v[line] / reference[line]))
        return angles, levels
