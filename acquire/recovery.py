"""Gather the points of a store that was broken off: from the store's chunks, and from the journal beside it."""

from __future__ import annotations

from collections.abc import Iterator
from dataclasses import dataclass
from pathlib import Path
from typing import Any

import msgspec
import numpy as np
import zarr
from numpy.typing import NDArray

from acquire.journal import journal_folder, read_journal
from acquire.layout import CHUNK
from acquire.record import PointRecord


@dataclass
class Recovered:
    """Points in order, without gaps."""

    records: list[PointRecord]
    counts: Any  # something that gives the counts of a point by its index

    def blocks(self) -> Iterator[tuple[list[PointRecord], list[NDArray[Any]]]]:
        """Records and counts, a chunk at a time."""
        for first in range(0, len(self.records), CHUNK):
            part = self.records[first : first + CHUNK]
            yield part, [self.counts(r.index) for r in part]


class Counts:
    """Counts of a point: from the journal while they are there, else from the store; one chunk is kept in hand."""

    def __init__(self, path: Path, journal: dict[int, NDArray[Any]]) -> None:
        self._array = zarr.open_array(path / "counts", mode="r")
        self._journal = journal
        self._number = -1
        self._chunk: NDArray[Any] = np.empty((0, 0))

    def __call__(self, index: int) -> NDArray[Any]:
        """Shape (samples,)."""
        if index in self._journal:
            return self._journal[index]
        number = index // CHUNK
        if number != self._number:
            self._chunk = np.asarray(self._array[number * CHUNK : (number + 1) * CHUNK])
            self._number = number
        row: NDArray[Any] = self._chunk[index % CHUNK]
        return row


def recover(path: Path, planned: int, samples: int) -> Recovered:
    """The points of a store that can be continued.

    Raises:
        ValueError: it is sealed, is no store of this scan, or has no journal; one line with the cure.
    """
    if not path.exists():
        raise ValueError(f"{path} does not exist: there is nothing to continue")
    for leftover in path.rglob("*.partial"):
        leftover.unlink()
    group = zarr.open_group(path, mode="r", use_consolidated=False)
    if group.attrs.get("sealed"):
        raise ValueError(f"{path} is sealed: there is nothing to continue")
    array = group["counts"]
    if not isinstance(array, zarr.Array) or array.shape != (planned, samples):
        raise ValueError(f"{path} holds another scan: it cannot be continued with this one")
    records = records_in(group)
    if not journal_folder(path).exists():
        return Recovered(records, Counts(path, {}))
    journaled, counts = read_journal(path, np.dtype(array.dtype), len(records))
    return Recovered(records + journaled, Counts(path, counts))


def records_in(group: zarr.Group) -> list[PointRecord]:
    """Records of the points that are committed, from the columns of a store."""

    def column(name: str) -> list[Any]:
        array = group[name]
        if not isinstance(array, zarr.Array):
            raise TypeError(f"{name} is no array")
        values: list[Any] = np.asarray(array[:count]).tolist()
        return values

    committed = group["committed"]
    count = int(np.asarray(committed[:]).sum()) if isinstance(committed, zarr.Array) else 0
    attributes: Any = group.attrs["circumstances"]
    interval, start = attributes["sample_interval_s"], attributes["record_start_s"]
    names = (
        *("plan_index", "reference", "plane", "commanded", "reported_before", "reported_after"),
        *("carriage_commanded", "carriage_before", "carriage_after", "time", "temperature"),
        *("volts_per_count", "volts_at_zero"),
    )
    left = zip(*(column(n) for n in names), strict=True)
    right = zip(*(column(n) for n in ("lowest", "highest", "averages", "full_scale")), strict=True)
    rows = enumerate(zip(left, right, strict=True))
    return [msgspec.convert((index, *a, interval, start, *b), PointRecord) for index, (a, b) in rows]
