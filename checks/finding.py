"""A finding: what a check says, how large it is, what it does to the result, what to turn."""

from __future__ import annotations

from collections.abc import Iterable
from dataclasses import dataclass
from typing import Literal, Protocol

from checks.observation import Observation

Severity = Literal["note", "caution", "halt"]
Action = Literal["raised", "updated", "cleared"]


@dataclass(frozen=True)
class Size:
    """A measured size with its standard uncertainty, both in `unit` (SI)."""

    name: str
    value: float
    standard_uncertainty: float
    unit: str


@dataclass(frozen=True)
class Finding:
    """One statement of a check.

    Attributes:
        code: stable, lower case with a dot, e.g. `pivot.offset`.
        sizes: one or more sizes, e.g. both components of an offset.
        points: (first, last, count) of the points concerned.
        consequence: what it does to the result, in the result's own terms.
        remedy: what to do, with a number where there is one.
    """

    code: str
    severity: Severity
    summary: str
    sizes: tuple[Size, ...]
    points: tuple[int, int, int]
    consequence: str
    remedy: str


@dataclass(frozen=True)
class Change:
    """A finding is raised, updated as evidence grows, or cleared when its cause is gone."""

    action: Action
    finding: Finding
    at_point: int


class Check(Protocol):
    """Sees every observation in order. No clock, no I/O; memory and cost per point do not grow."""

    def update(self, seen: Observation) -> Iterable[Change]:
        """Take one more point; return what changed in what this check says."""
        ...

    def finish(self) -> Iterable[Change]:
        """The scan has ended (completed or broken off)."""
        ...
