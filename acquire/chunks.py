"""Full chunks on their way into the store, written beside the recorder's own work."""

from __future__ import annotations

from collections import deque
from collections.abc import Sequence
from concurrent.futures import Future, ThreadPoolExecutor
from dataclasses import dataclass
from pathlib import Path
from typing import Any

import numpy as np
from numpy.typing import NDArray

from acquire.arrays import StoreArrays
from acquire.journal import Journal
from acquire.layout import WIDE_CHUNK
from acquire.record import PointRecord
from checks.observation import Observation

MOST_PENDING = 3  # chunks that wait for the disk; beyond that the recorder waits too, and in the end the bench


@dataclass
class ChunkWriter:
    """Collects points into chunks; one thread writes them, and only then lets the journal forget them."""

    path: Path
    journal: Journal
    samples: int
    dtype: np.dtype[Any]

    def __post_init__(self) -> None:
        self._pool = ThreadPoolExecutor(1, "chunks")
        self._pending: list[Future[None]] = []
        self.size = self.journal.chunk
        self._arrays = StoreArrays(self.path)
        self._idle: deque[NDArray[Any]] = deque()
        self._counts = self._fresh()
        self._records: list[PointRecord] = []
        self._wide: list[tuple[PointRecord, Observation]] = []

    def _fresh(self) -> NDArray[Any]:
        return self._idle.popleft() if self._idle else np.zeros((self.size, self.samples), self.dtype)

    def place(self, index: int, counts: NDArray[Any]) -> NDArray[Any]:
        """Copy a point's counts into the chunk in hand; the row stays valid until the chunk is full."""
        row: NDArray[Any] = self._counts[index % self.size]
        row[:] = counts
        return row

    def ends(self, index: int) -> bool:
        """Whether the point is the last of a chunk."""
        return index % self.size == self.size - 1

    def add(self, records: Sequence[PointRecord], seen: Sequence[Observation], durable: bool = False) -> None:
        """Points whose counts were placed, reduced; in order, within one chunk, which may be in the store already."""
        self._records += records
        self._wide += zip(records, seen, strict=True)
        if self.ends(records[-1].index):
            self._submit_counts(durable)
        if records[-1].index % WIDE_CHUNK == WIDE_CHUNK - 1:
            self._submit_columns()
        self._raise_failures()

    def flush(self) -> None:
        """Write what is left and wait for it.

        Raises:
            OSError: the disk did not take it.
        """
        if self._records:
            self._submit_counts()
        if self._wide:
            self._submit_columns()
        for future in self._pending:
            future.result()
        self._pending.clear()

    def close(self) -> None:
        """End the thread."""
        self._pool.shutdown(cancel_futures=True)

    def _submit_counts(self, durable: bool = False) -> None:
        if not durable:
            number = self._records[0].index // self.size
            self._pending.append(self._pool.submit(self._write, number, self._counts, self._records))
            self._counts = self._fresh()
        self._records = []

    def _submit_columns(self) -> None:
        first = self._wide[0][0].index
        records, seen = zip(*self._wide, strict=True)
        self._pending.append(self._pool.submit(self._arrays.write_columns, first, records, seen))
        self._wide = []

    def _write(self, number: int, counts: NDArray[Any], records: list[PointRecord]) -> None:
        self._arrays.write_counts(number, counts[: len(records)])
        self.journal.chunk_is_durable(number, records)
        self._idle.append(counts)

    def _raise_failures(self) -> None:
        if len(self._pending) > MOST_PENDING:
            self._pending.pop(0).result()
        done = [f for f in self._pending if f.done()]
        self._pending = [f for f in self._pending if not f.done()]
        for future in done:
            future.result()
