"""Full chunks on their way into the store, written beside the recorder's own work."""

from __future__ import annotations

from collections.abc import Sequence
from concurrent.futures import Future, ThreadPoolExecutor
from dataclasses import dataclass
from pathlib import Path
from queue import SimpleQueue
from typing import Any

import numpy as np
from numpy.typing import NDArray

from acquire.arrays import StoreArrays
from acquire.journal import Journal
from acquire.record import PointRecord
from checks.observation import Observation

BUFFERS = 4  # chunks in hand or waiting for the disk; beyond that the recorder waits too, and in the end the bench


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
        self._idle: SimpleQueue[NDArray[Any]] = SimpleQueue()
        for _ in range(BUFFERS):
            self._idle.put(np.full((self.size, self.samples), 0, self.dtype))  # all the memory that it will ever need
        self._counts = self._idle.get()
        self._records: list[PointRecord] = []
        self._seen: list[Observation] = []

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
        self._seen += seen
        if self.ends(records[-1].index):
            self._submit(durable)
        self._raise_failures()

    def flush(self) -> None:
        """Write what is left and wait for it.

        Raises:
            OSError: the disk did not take it.
        """
        if self._records:
            self._submit()
        self._pending.append(self._pool.submit(self._arrays.write_columns))
        for future in self._pending:
            future.result()
        self._pending.clear()

    def close(self) -> None:
        """End the thread."""
        self._pool.shutdown(cancel_futures=True)

    def _submit(self, durable: bool = False) -> None:
        write = self._gather if durable else self._write
        self._pending.append(self._pool.submit(write, self._counts, self._records, self._seen))
        self._counts, self._records, self._seen = self._idle.get(), [], []

    def _write(self, counts: NDArray[Any], records: list[PointRecord], seen: list[Observation]) -> None:
        number = records[0].index // self.size
        try:
            self._arrays.write_counts(number, counts[: len(records)])
            self.journal.chunk_is_durable(number, records)
        finally:
            self._idle.put(counts)
        self._arrays.gather(records, seen)

    def _gather(self, counts: NDArray[Any], records: list[PointRecord], seen: list[Observation]) -> None:
        self._idle.put(counts)
        self._arrays.gather(records, seen)

    def _raise_failures(self) -> None:
        done = [f for f in self._pending if f.done()]
        self._pending = [f for f in self._pending if not f.done()]
        for future in done:
            future.result()
