"""Reading a store: profiles, observations, counts block by block, and the checks once more."""

from __future__ import annotations

from collections.abc import Iterator
from dataclasses import dataclass
from functools import cached_property
from pathlib import Path
from typing import Any

import numpy as np
import zarr
from numpy.typing import NDArray

from acquire.header import circumstances_from_mapping, read_attributes
from acquire.judge import Judge, changes_as_mappings, meta_of, standing
from acquire.prepare import Job
from acquire.record import PointRecord
from acquire.recovery import Counts, Recovered, gather, records_in
from checks.observation import Circumstances, Observation
from profiles.bench import Bench
from profiles.scan import Scan
from profiles.sensor import Sensor
from profiles.source import Source


class NotAStore(Exception):
    """The folder holds no scan, or nothing of it can be read; one line."""


@dataclass(frozen=True)
class StoredScan:
    """A stored scan, sealed or not. A scan that was killed is read from its journal too."""

    path: Path
    attributes: dict[str, Any]

    @cached_property
    def circumstances(self) -> Circumstances:
        """As the live checks had them."""
        return circumstances_from_mapping(self.attributes["circumstances"])

    @cached_property
    def job(self) -> Job:
        """The profiles as they were resolved."""
        p = self.attributes["profiles"]
        return Job(
            Bench.model_validate(p["bench"]),
            Sensor.model_validate(p["sensor"]),
            Source.model_validate(p["source"]),
            Scan.model_validate(p["scan"]),
        )

    @property
    def sealed(self) -> bool:
        """Whether every point is there."""
        return bool(self.attributes["sealed"])

    @property
    def _finished(self) -> bool:
        """Whether the recorder came to its end, sealing or broken off: all is then in the store."""
        return "points" in self.attributes

    @cached_property
    def _points(self) -> Recovered:
        group = zarr.open_group(self.path, mode="r", use_consolidated=False)
        if self._finished:
            return Recovered(records_in(group), Counts(self.path, {}))
        return gather(self.path)

    @property
    def records(self) -> list[PointRecord]:
        """Records of all points, in order."""
        return self._points.records

    def counts(self, index: int) -> NDArray[Any]:
        """Raw counts of a point, shape (samples,)."""
        row: NDArray[Any] = self._points.counts(index)
        return row

    def blocks(self) -> Iterator[tuple[list[PointRecord], list[NDArray[Any]]]]:
        """Records and counts, a chunk at a time."""
        return self._points.blocks()

    def observations(self) -> list[Observation]:
        """The observations, from the numbers stored beside the counts; computed again where they are not stored."""
        if not self._finished:
            return self._judged[0]
        group = zarr.open_group(self.path, mode="r", use_consolidated=False)
        return observations_in(group, self.records)

    @cached_property
    def _judged(self) -> tuple[list[Observation], list[dict[str, Any]]]:
        return self.judged()

    def judged(self) -> tuple[list[Observation], list[dict[str, Any]]]:
        """Observations and what the checks say, computed once more from the counts."""
        from threadpoolctl import threadpool_limits

        judge = Judge(self.circumstances)
        seen: list[Observation] = []
        with threadpool_limits(1, "blas"):  # as in the recorder: the same sums in the same order
            for records, counts in self.blocks():
                seen += judge.take(records, counts)[0]
        judge.finish()
        return seen, changes_as_mappings(judge.changes)

    @property
    def changes(self) -> list[dict[str, Any]]:
        """What the checks said while the scan ran; of a scan that was killed, what they say of its points."""
        if not self._finished:
            return self._judged[1]
        found: list[dict[str, Any]] = self.attributes["finding_changes"]
        return found

    def findings(self) -> list[dict[str, Any]]:
        """The findings that stood at the end."""
        return standing(self.changes)


def open_stored(path: Path) -> StoredScan:
    """A store for reading.

    Raises:
        NotAStore: there is none.
    """
    try:
        return StoredScan(path, read_attributes(path))
    except ValueError as error:
        raise NotAStore(str(error)) from error


def observations_in(group: zarr.Group, records: list[PointRecord]) -> list[Observation]:
    """Observations from the columns of a finished store."""
    count = len(records)

    def column(name: str) -> NDArray[Any]:
        array = group[name]
        return np.asarray(array[:count]) if isinstance(array, zarr.Array) else np.empty(0)

    arrays = {name: column(name) for name in ("components", "side_components", "component_noise")}
    plain = {name: column(stored).tolist() for name, stored in SCALARS.items()}
    found = []
    for i, record in enumerate(records):
        m = meta_of(record)
        found.append(
            Observation(
                index=m.index,
                reference=m.reference,
                plane=m.plane,
                commanded=m.commanded,
                reported_before=m.reported_before,
                reported_after=m.reported_after,
                time_s=m.time_s,
                temperature_c=m.temperature_c,
                components=arrays["components"][i],
                side_components=arrays["side_components"][i],
                component_noise_v=arrays["component_noise"][i],
                **{name: values[i] for name, values in plain.items()},
            )
        )
    return found


SCALARS = {
    "peak_v": "peak",
    "trough_v": "trough",
    "square_integral_v2s": "square_integral",
    "noise_rms_v": "noise_rms",
    "offset_v": "offset",
    "clipped_high": "clipped_high",
    "clipped_low": "clipped_low",
    "range_use": "range_use",
}
