"""Where a point is safe from the moment it is announced until its chunk is durable.

A folder beside the store. `points.log` holds the records of points whose counts are in the store already;
`segment-<chunk>.bin` holds record and counts of the points of a chunk that is not. Every entry has a checksum;
reading ends at the first one that is not whole, which is where a death left the file.
"""

from __future__ import annotations

import errno
import os
import shutil
import struct
import zlib
from collections.abc import Iterable, Iterator, Sequence
from pathlib import Path
from typing import Any, BinaryIO

import msgspec
import numpy as np
from numpy.typing import NDArray

from acquire.durable import sync_folder
from acquire.record import PointRecord

HEAD = struct.Struct("<4sIII")  # magic, length of the record, length of the counts, CRC of both
MAGIC = b"TPJ1"
LOG = "points.log"
encode = msgspec.msgpack.Encoder().encode
decode = msgspec.msgpack.Decoder(PointRecord).decode


def journal_folder(store: Path) -> Path:
    """The journal of a store, `NAME.journal` beside `NAME.zarr`."""
    return store.with_suffix(".journal")


class Journal:
    """Appends; nothing is safe before `sync` has returned.

    What is there already is kept up to point `points`; the rest, and a last entry that is not whole, is cut off, so
    that what is appended now can be read later.
    """

    def __init__(self, store: Path, chunk: int, points: int = 0) -> None:
        self.folder = journal_folder(store)
        self.folder.mkdir(exist_ok=True)
        self.chunk = chunk
        self._cut_after(points)
        (self.folder / LOG).touch()
        sync_folder(self.folder)
        sync_folder(self.folder.parent)
        self._segment: BinaryIO | None = None
        self._number = -1

    def _cut_after(self, points: int) -> None:
        for segment in self.folder.glob("segment-*.bin"):
            if int(segment.stem.removeprefix("segment-")) * self.chunk >= points:
                segment.unlink()
        for path in self.folder.iterdir():
            whole = sum(HEAD.size + len(record) + len(counts) for record, counts in _entries(path))
            if whole < path.stat().st_size:
                with path.open("r+b") as file:
                    file.truncate(whole)
                    os.fsync(file.fileno())

    def add(self, records: Sequence[PointRecord], counts: Sequence[NDArray[Any]]) -> None:
        """Append points of one chunk."""
        number = records[0].index // self.chunk
        if number != self._number:
            self._open_segment(number)
        if self._segment is None:
            raise RuntimeError("no segment is open")
        _append(self._segment, [(encode(r), c.data.cast("B")) for r, c in zip(records, counts, strict=True)])

    def _open_segment(self, number: int) -> None:
        self.sync()
        if self._segment is not None:
            self._segment.close()
        self._segment = (self.folder / f"segment-{number:08d}.bin").open("ab", buffering=0)
        self._number = number
        sync_folder(self.folder)

    def sync(self) -> None:
        """Make all that was added durable."""
        if self._segment is not None:
            os.fdatasync(self._segment.fileno())

    def chunk_is_durable(self, number: int, records: list[PointRecord]) -> None:
        """The counts of a chunk are in the store: keep its records, drop its segment."""
        with (self.folder / LOG).open("ab", buffering=0) as log:
            _append(log, [(encode(record), b"") for record in records])
            os.fdatasync(log.fileno())
        (self.folder / f"segment-{number:08d}.bin").unlink(missing_ok=True)

    def close(self) -> None:
        """Close the files; the journal stays."""
        if self._segment is not None:
            self._segment.close()
            self._segment = None

    def remove(self) -> None:
        """Everything is in the store."""
        self.close()
        shutil.rmtree(self.folder)


def _append(file: BinaryIO, entries: Iterable[tuple[bytes, bytes | memoryview]]) -> None:
    parts: list[bytes | memoryview] = []
    for record, counts in entries:
        check = zlib.crc32(counts, zlib.crc32(record))
        parts += (HEAD.pack(MAGIC, len(record), len(counts), check), record, counts)
    if os.writev(file.fileno(), parts) != sum(map(len, parts)):
        raise OSError(errno.ENOSPC, "the disk took only part of an entry")


def _entries(path: Path) -> Iterator[tuple[bytes, bytes]]:
    """Encoded record and counts of every entry, up to the first that is not whole."""
    try:
        file = path.open("rb")
    except FileNotFoundError:  # a recorder that is at work has moved it into the store
        return
    with file:
        while len(head := file.read(HEAD.size)) == HEAD.size:
            magic, record_length, counts_length, check = HEAD.unpack(head)
            if magic != MAGIC:
                return
            body = file.read(record_length + counts_length)
            if len(body) < record_length + counts_length or zlib.crc32(body) != check:
                return
            yield body[:record_length], body[record_length:]


def read_journal(
    store: Path, dtype: np.dtype[Any], first: int = 0
) -> tuple[list[PointRecord], dict[int, NDArray[Any]]]:
    """What a journal holds from point `first` on: records without gaps, and counts that are not in the store yet.

    Segments come before the log: a chunk that becomes durable meanwhile is then in both, and not in neither.
    """
    folder = journal_folder(store)
    records: dict[int, PointRecord] = {}
    counts: dict[int, NDArray[Any]] = {}
    for segment in sorted(folder.glob("segment-*.bin")):
        for encoded, data in _entries(segment):
            record = decode(encoded)
            records[record.index] = record
            counts[record.index] = np.frombuffer(data, dtype)
    for encoded, _ in _entries(folder / LOG):
        record = decode(encoded)
        records.setdefault(record.index, record)
    whole: list[PointRecord] = []
    while first + len(whole) in records:
        whole.append(records[first + len(whole)])
    return whole, {i: c for i, c in counts.items() if first <= i < first + len(whole)}
