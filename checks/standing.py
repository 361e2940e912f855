"""Whether a finding is raised, updated or cleared, so that a check need only say what it sees now."""

from __future__ import annotations

from checks.finding import Change, Finding

GROWTH = 2.0  # told again when so many times as sure; a tally when it concerns so many times as many points
STEP = 0.25  # told again when a size has moved by so much of itself, and by two standard uncertainties
EASE = 0.7  # a standing finding is cleared only below this share of what raised it, so that it does not flicker
EVERY, AT_FIRST = 8, 32


def due(points: int) -> bool:
    """Whether a costly estimate is made at this point: at each of the first ones, later at every eighth."""
    return points <= AT_FIRST or points % EVERY == 0


class Standing:
    """What one check has said under one code.

    `tally`: the number of points concerned is part of what is said, as for clipped points.
    """

    def __init__(self, tally: bool = False) -> None:
        self._tally = tally
        self._told: Finding | None = None
        self._latest: Finding | None = None
        self._at = 0

    @property
    def ease(self) -> float:
        """By what a threshold is multiplied: 1, or less while the finding stands."""
        return 1.0 if self._told is None else EASE

    def now(self, finding: Finding | None, at_point: int) -> list[Change]:
        """`finding` is what there is to say now, None for nothing."""
        told = self._told
        self._latest, self._at = finding, at_point
        if finding is None:
            self._told = None
            return [Change("cleared", told, at_point)] if told is not None else []
        if told is None:
            self._told = finding
            return [Change("raised", finding, at_point)]
        if self._moved(told, finding, STEP, 2.0):
            self._told = finding
            return [Change("updated", finding, at_point)]
        return []

    def last_word(self) -> list[Change]:
        """At the end of a scan: the last size, where it is not the one that was told."""
        if self._told is None or self._latest is None or not self._moved(self._told, self._latest, 0.0, 0.5):
            return []
        self._told = self._latest
        return [Change("updated", self._latest, self._at)]

    def _moved(self, last: Finding, now: Finding, share: float, sure: float) -> bool:
        """A size has moved by more than that share of itself and so many uncertainties, or is known far better."""
        if last.severity != now.severity or len(last.sizes) != len(now.sizes):
            return True
        for a, b in zip(last.sizes, now.sizes, strict=True):
            if abs(b.value - a.value) > max(sure * b.standard_uncertainty, share * abs(a.value)):
                return True
            if b.standard_uncertainty < a.standard_uncertainty / GROWTH:
                return True
        growth = GROWTH if share else 1.0
        return self._tally and now.points[2] > last.points[2] and now.points[2] >= growth * last.points[2]
