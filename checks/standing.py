"""Whether a finding is raised, updated or cleared, so that a check need only say what it sees now."""

from __future__ import annotations

from checks.finding import Change, Finding

GROWTH = 2.0  # an unchanged finding is told again when it concerns so many times as many points


class Standing:
    """What one check has said under one code."""

    def __init__(self) -> None:
        self._last: Finding | None = None

    @property
    def raised(self) -> bool:
        """The finding stands."""
        return self._last is not None

    def now(self, finding: Finding | None, at_point: int) -> list[Change]:
        """`finding` is what there is to say now, None for nothing."""
        last = self._last
        if finding is None:
            self._last = None
            return [Change("cleared", last, at_point)] if last is not None else []
        if last is None:
            self._last = finding
            return [Change("raised", finding, at_point)]
        if _moved(last, finding):
            self._last = finding
            return [Change("updated", finding, at_point)]
        return []


def _moved(last: Finding, now: Finding) -> bool:
    """A size has moved by more than its uncertainty, became twice as sure, or the severity changed."""
    if last.severity != now.severity or len(last.sizes) != len(now.sizes):
        return True
    for a, b in zip(last.sizes, now.sizes, strict=True):
        if abs(b.value - a.value) > max(a.standard_uncertainty, b.standard_uncertainty):
            return True
        if b.standard_uncertainty < a.standard_uncertainty / GROWTH:
            return True
    return now.points[2] >= GROWTH * max(1, last.points[2])
