"""From points to observations and to what the checks say: one way, live and again later."""

from __future__ import annotations

import json
from collections.abc import Iterable, Sequence
from dataclasses import asdict
from typing import Any

import numpy as np

from acquire.messages import FindingChanged, PointSeen
from acquire.record import PointRecord
from checks.finding import Change
from checks.live import make_checks
from checks.observation import Circumstances, Observation, Pose
from checks.reduce import ROWS, Counts, PointMeta, Reducer


def meta_of(record: PointRecord) -> PointMeta:
    """What the reduction needs of a point's record."""
    return PointMeta(
        index=record.index,
        reference=record.reference,
        plane=record.plane,
        commanded=Pose(*record.commanded),
        reported_before=Pose(*record.before),
        reported_after=Pose(*record.after),
        time_s=record.time_s,
        temperature_c=record.temperature_c,
        volts_per_count=record.volts_per_count,
        volts_at_zero=record.volts_at_zero,
        lowest=record.lowest,
        highest=record.highest,
    )


class Judge:
    """Reduces points in order and feeds the checks; the same points give the same changes, to the letter."""

    def __init__(self, circumstances: Circumstances) -> None:
        self._reducer = Reducer(circumstances)
        self._checks = make_checks(circumstances)
        self.changes: list[Change] = []

    def take(self, records: Sequence[PointRecord], counts: Sequence[Counts]) -> tuple[list[Observation], list[Change]]:
        """More points, in order; they may cross the aligned blocks that are reduced together."""
        seen: list[Observation] = []
        start = 0
        while start < len(records):
            stop = start + ROWS - records[start].index % ROWS
            block = slice(start, stop)
            seen += self._reducer.reduce(counts[block], [meta_of(r) for r in records[block]])
            start = stop
        new = [change for observation in seen for check in self._checks for change in check.update(observation)]
        self.changes += new
        return seen, new

    def finish(self) -> list[Change]:
        """No more points come."""
        new = [change for check in self._checks for change in check.finish()]
        self.changes += new
        return new


def point_event(seen: Observation) -> PointSeen:
    """What a live view shows of a point."""
    p = seen.commanded
    return PointSeen(
        index=seen.index,
        reference=seen.reference,
        plane=seen.plane,
        pose=(p.x, p.y, p.z, p.theta, p.phi),
        time_s=seen.time_s,
        temperature_c=seen.temperature_c,
        amplitudes_v=np.abs(seen.components).tolist(),
        peak_v=seen.peak_v,
        trough_v=seen.trough_v,
        square_integral_v2s=seen.square_integral_v2s,
        range_use=seen.range_use,
    )


def finding_event(change: Change) -> FindingChanged:
    """A change as a message."""
    return FindingChanged(action=change.action, at_point=change.at_point, finding=asdict(change.finding))


def changes_as_mappings(changes: Iterable[Change]) -> list[dict[str, Any]]:
    """For the attributes of a store: exactly what reading them back from JSON gives."""
    plain = [{"action": c.action, "at_point": c.at_point, "finding": asdict(c.finding)} for c in changes]
    mappings: list[dict[str, Any]] = json.loads(json.dumps(plain))
    return mappings


def standing(changes: Iterable[dict[str, Any]]) -> list[dict[str, Any]]:
    """The findings that stand after all changes, in the order in which they were first raised."""
    found: dict[str, dict[str, Any]] = {}
    for change in changes:
        finding = change["finding"]
        if change["action"] == "cleared":
            found.pop(finding["code"], None)
        else:
            found[finding["code"]] = finding
    return list(found.values())
