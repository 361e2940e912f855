"""Gather the points of a store that was broken off: from the store's chunks, and from the journal beside it.

Reading changes nothing, so a store may be read while its recorder is at work.
"""

from __future__ import annotations

from collections.abc import Iterator
from dataclasses import dataclass
from pathlib import Path
from typing import Any

import msgspec
import numpy as np
import zarr
from numpy.typing import NDArray

from acquire.header import StoreHeader
from acquire.journal import read_journal
from acquire.layout import chunk_file
from acquire.record import PointRecord


class StoreDamaged(ValueError):
    """What the store says it holds cannot be read; one line."""


class Counts:
    """Counts of a point: from the journal while they are there, else from the store; one chunk is kept in hand."""

    def __init__(self, path: Path, journal: dict[int, NDArray[Any]]) -> None:
        self._path = path
        self._array = zarr.open_array(path / "counts", mode="r")
        self._journal = journal
        self._number = -1
        self._chunk: NDArray[Any] = np.empty((0, 0))
        self.chunk_points = self._array.chunks[0]

    def in_journal(self, index: int) -> bool:
        """Whether the journal still keeps them."""
        return index in self._journal

    def __call__(self, index: int) -> NDArray[Any]:
        """Shape (samples,)."""
        if index in self._journal:
            return self._journal[index]
        number = index // self.chunk_points
        if number != self._number:
            self._chunk = self._read(number)
            self._number = number
        row: NDArray[Any] = self._chunk[index % self.chunk_points]
        return row

    def _read(self, number: int) -> NDArray[Any]:
        first = number * self.chunk_points
        if not chunk_file(self._path, number).exists():  # it would read as zeros
            raise StoreDamaged(f"{self._path}: the counts of points {first} and after are missing")
        try:
            return np.asarray(self._array[first : first + self.chunk_points])
        except (ValueError, RuntimeError) as error:
            raise StoreDamaged(f"{self._path}: the counts of points {first} and after are damaged: {error}") from error


@dataclass
class Recovered:
    """Points in order, without gaps."""

    records: list[PointRecord]
    counts: Counts

    def blocks(self) -> Iterator[tuple[list[PointRecord], list[NDArray[Any]]]]:
        """Records and counts, a chunk at a time."""
        size = self.counts.chunk_points
        for first in range(0, len(self.records), size):
            part = self.records[first : first + size]
            yield part, [self.counts(r.index) for r in part]


def gather(path: Path) -> Recovered:
    """The points of a store that has not been finished, or is being written."""
    group = zarr.open_group(path, mode="r", use_consolidated=False)
    records = records_in(group)
    dtype = zarr.open_array(path / "counts", mode="r").dtype
    journaled, counts = read_journal(path, np.dtype(dtype), len(records))
    return Recovered(records + journaled, Counts(path, counts))


def recover(path: Path, header: StoreHeader, dtype: np.dtype[Any], shape: tuple[int, int]) -> Recovered:
    """The points of a store, to be continued with a scan of `shape` (points, samples).

    Raises:
        ValueError: it is sealed, or of another scan; one line.
    """
    group = zarr.open_group(path, mode="r", use_consolidated=False)
    if group.attrs["sealed"]:
        raise ValueError(f"{path} is sealed: there is nothing to continue")
    counts = zarr.open_array(path / "counts", mode="r")
    profiles: Any = group.attrs["profiles"]
    if (counts.shape, counts.dtype) != (shape, dtype) or not header.continues(profiles):
        raise ValueError(f"{path} holds another scan: it cannot be continued with this one")
    for leftover in path.rglob("*.partial"):
        leftover.unlink()
    return gather(path)


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
