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
    """For one thread. What is written is durable when the call returns."""

    def __init__(self, path: Path) -> None:
        self._path = path
        self._arrays = dict(zarr.open_group(path, mode="r+").arrays())

    def write_counts(self, number: int, counts: NDArray[Any]) -> None:
        """Write one chunk of counts, once; `counts` has shape (up to a chunk's points, samples).

        Raises:
            OSError: the disk did not take it.
        """
        array = self._arrays["counts"]
        first = number * array.chunks[0]
        array[first : first + counts.shape[0]] = counts
        sync_below(self._path, chunk_file(self._path, number))

    def write_columns(self, first: int, records: Sequence[PointRecord], seen: Sequence[Observation]) -> None:
        """Write the rows of some points into every column; `first` begins a chunk.

        Raises:
            OSError: the disk did not take it.
        """
        for column in COLUMNS:  # `committed` is the last of them
            rows = [column.of(r, o) for r, o in zip(records, seen, strict=True)]
            self._arrays[column.name][first : first + len(rows)] = np.array(rows, column.dtype)
            inner = ["0"] * len(column.dimensions)
            file = self._path.joinpath(column.name, "c", str(first // WIDE_CHUNK), *inner)
            if file.exists():  # a chunk that is all fill value is not written
                sync_below(self._path, file)
