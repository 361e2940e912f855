"""The arrays of a store, kept open while points are written into them chunk by chunk."""

from __future__ import annotations

from collections.abc import Sequence
from pathlib import Path
from typing import Any

import numpy as np
import zarr
from numpy.typing import NDArray

from acquire.durable import sync_below
from acquire.layout import COLUMNS, WIDE_CHUNK, chunk_file
from acquire.record import PointRecord
from checks.observation import Observation


class StoreArrays:
    """For one thread. Counts are written a chunk at a time; the rows of the columns are gathered for a wide chunk."""

    def __init__(self, path: Path) -> None:
        self._path = path
        self._arrays = dict(zarr.open_group(path, mode="r+").arrays())
        self._rows = {
            column.name: np.full((min(WIDE_CHUNK, array.shape[0]), *array.shape[1:]), 0, array.dtype)
            for column in COLUMNS
            for array in [self._arrays[column.name]]
        }
        self._first = self._next = 0

    def write_counts(self, number: int, counts: NDArray[Any]) -> None:
        """Write one chunk of counts, once; it is durable when the call returns.

        Args:
            number: of the chunk.
            counts: shape (up to a chunk's points, samples).

        Raises:
            OSError: the disk did not take it.
        """
        array = self._arrays["counts"]
        first = number * array.chunks[0]
        array[first : first + counts.shape[0]] = counts
        sync_below(self._path, chunk_file(self._path, number))

    def gather(self, records: Sequence[PointRecord], seen: Sequence[Observation]) -> None:
        """The points that follow those gathered before, up to the end of a wide chunk; a full one is written.

        Raises:
            OSError: the disk did not take it.
        """
        rows = slice(self._next - self._first, self._next - self._first + len(records))
        for column in COLUMNS:
            self._rows[column.name][rows] = [column.of(r, o) for r, o in zip(records, seen, strict=True)]
        self._next += len(records)
        if self._next - self._first == WIDE_CHUNK:
            self.write_columns()
            self._first = self._next

    def write_columns(self) -> None:
        """Write the rows gathered; they are durable when the call returns.

        Raises:
            OSError: the disk did not take it.
        """
        for column in COLUMNS:  # `committed` is the last of them
            count = self._next - self._first
            self._arrays[column.name][self._first : self._next] = self._rows[column.name][:count]
            inner = ["0"] * len(column.dimensions)
            file = self._path.joinpath(column.name, "c", str(self._first // WIDE_CHUNK), *inner)
            if file.exists():  # a chunk that is all fill value is not written
                sync_below(self._path, file)
