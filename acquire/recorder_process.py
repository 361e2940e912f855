"""The recorder's process: points in; journal, observations, findings and chunks out.

One thread takes points, makes them durable and judges them; another writes full chunks. At the end of its input,
however that came about, it keeps what it has and ends.
"""

from __future__ import annotations

import gc
import pickle
import signal
import sys
from multiprocessing.connection import Connection
from pathlib import Path
from time import monotonic
from typing import Any

import zarr
from numpy.typing import NDArray

from acquire import wire
from acquire.channel import Channel
from acquire.chunks import ChunkWriter
from acquire.journal import Journal
from acquire.judge import Judge, changes_as_mappings, finding_event, point_event
from acquire.layout import CHUNK, consolidate, create
from acquire.messages import Event, PointsStored
from acquire.record import PointRecord
from acquire.recovery import Recovered, recover
from acquire.ring import Ring
from acquire.thinned import thinned

SYNC_POINTS = 64  # made durable at the latest after so many points
SYNC_S = 0.05  # or after so long
BATCH = 16
PICTURE_S = 0.2


class RecorderLoop:
    """State of the recorder between points."""

    def __init__(self, pipe: Channel, setup: wire.Setup, ring: Ring) -> None:
        self._pipe = pipe
        self._setup = setup
        self._ring = ring
        self._path = Path(setup.path)
        self._slot = 0
        self._unsynced = 0
        self._oldest = 0.0
        self._drawn = 0.0
        self._announced = -1
        self._judge = Judge(setup.circumstances)
        already = self._prepare()
        self._journal = Journal(self._path, CHUNK)
        self._chunks = ChunkWriter(self._path, self._journal, setup.samples, setup.dtype)
        self._refeed(already)

    def _prepare(self) -> Recovered:
        """A new store, or an old one whose points are all gathered."""
        setup = self._setup
        if setup.continue_store:
            return recover(self._path, setup.planned, setup.samples)
        if self._path.exists():
            raise FileExistsError(f"{self._path} exists already: choose another name, or continue it")
        self._path.parent.mkdir(parents=True, exist_ok=True)
        attributes = setup.header.attributes(setup.circumstances)
        create(self._path, attributes, setup.circumstances, setup.dtype.name, (setup.planned, setup.samples))
        return Recovered([], None)

    def _refeed(self, already: Recovered) -> None:
        """Judge what is there again, so that the checks go on as if nothing had happened."""
        for records, counts in already.blocks():
            rows = [self._chunks.place(r.index, c) for r, c in zip(records, counts, strict=True)]
            seen, _ = self._judge.take(records, rows)
            self._chunks.add(records, seen)
            if records[-1].index % CHUNK != CHUNK - 1:  # its chunk is not full yet, so only the journal keeps it
                for record, row in zip(records, rows, strict=True):
                    self._journal.add(record, row)
                self._journal.sync()
        self._announced = len(already.records) - 1
        self._pipe.send(wire.READY + str(len(already.records)).encode())

    def run(self) -> None:
        """Until told to finish, or the daemon is gone."""
        while True:
            try:
                left = SYNC_S - (monotonic() - self._oldest) if self._unsynced else None
                if left is not None and (left <= 0 or not self._pipe.ready(left)):
                    self._sync()
                    continue
                frames = [self._pipe.receive()]
                while len(frames) < BATCH and frames[-1][:1] == wire.POINT and self._pipe.ready():
                    frames.append(self._pipe.receive())
            except (EOFError, OSError):
                self._sync_quietly()
                return
            points = [wire.decode_record(f[1:]) for f in frames if f[:1] == wire.POINT]
            if points:
                self._take(points)
            if frames[-1][:1] == wire.FINISH:
                self._finish(sealed=frames[-1][1:] == b"1")
                return

    def _take(self, records: list[PointRecord]) -> None:
        """A batch of points: durable soon, judged now. It is split where a chunk ends."""
        while records:
            room = CHUNK - records[0].index % CHUNK
            part, records = records[:room], records[room:]
            rows = []
            for record in part:
                rows.append(self._chunks.place(record.index, self._ring.rows[self._slot]))
                self._slot = (self._slot + 1) % self._ring.slots
            self._pipe.send(wire.FREED + str(len(part)).encode())
            for record, row in zip(part, rows, strict=True):
                self._journal.add(record, row)
            if not self._unsynced:
                self._oldest = monotonic()
            self._unsynced += len(part)
            self._judge_part(part, rows)
            if self._unsynced >= SYNC_POINTS:
                self._sync()

    def _judge_part(self, records: list[PointRecord], rows: list[NDArray[Any]]) -> None:
        seen, changes = self._judge.take(records, rows)
        events: list[Event] = [point_event(o) for o in seen]
        if monotonic() - self._drawn >= PICTURE_S:
            self._drawn = monotonic()
            events.append(thinned(records[-1], rows[-1]))
        self._pipe.send(wire.EVENTS + wire.encode(events))
        if changes:
            self._pipe.send(wire.FINDINGS + wire.encode([finding_event(c) for c in changes]))
        if records[-1].index % CHUNK == CHUNK - 1:
            self._sync()  # before the chunk's rows are used again
        self._chunks.add(records, seen)

    def _sync(self) -> None:
        if self._unsynced:
            self._journal.sync()
            count, self._unsynced = self._unsynced, 0
            self._announced += count
            event = PointsStored(last=self._announced, count=count)
            self._pipe.send(wire.EVENTS + wire.encode([event]))

    def _sync_quietly(self) -> None:
        """The daemon is gone: keep what is there, tell nobody."""
        if self._unsynced:
            self._journal.sync()

    def _finish(self, sealed: bool) -> None:
        """Complete the store; the journal is no longer needed afterwards."""
        self._sync()
        changes = self._judge.finish()
        self._chunks.flush()
        group = zarr.open_group(self._path, mode="r+", use_consolidated=False)
        closing: dict[str, Any] = {
            "sealed": sealed,
            "points": self._announced + 1,
            "finding_changes": changes_as_mappings(self._judge.changes),
        }
        group.attrs.update(closing)
        consolidate(self._path)
        self._journal.remove()
        if changes:
            self._pipe.send(wire.FINDINGS + wire.encode([finding_event(c) for c in changes]))
        self._pipe.send(wire.FINISHED)

    def close(self) -> None:
        """End the thread, close the files."""
        self._chunks.close()
        self._journal.close()


def told(error: OSError) -> str:
    """One line for the user."""
    if error.errno == 28:
        return "the disk is full: free some space, then continue the scan; every announced point is safe"
    return f"storing failed: {error.strerror or error}"


def main() -> int:
    """Entry point: two file descriptors, of the pipe and of the ring."""
    signal.signal(signal.SIGINT, signal.SIG_IGN)
    pipe = Channel(Connection(int(sys.argv[1])))
    setup: wire.Setup = pickle.loads(pipe.receive())  # from the parent process only
    ring = Ring(int(sys.argv[2]), setup.slots, setup.samples, setup.dtype)
    loop = None
    try:
        loop = RecorderLoop(pipe, setup, ring)
        gc.freeze()  # what is there now stays: later collections need not look at it
        loop.run()
    except (OSError, ValueError) as error:
        line = told(error) if isinstance(error, OSError) else str(error)
        try:
            pipe.send(wire.FAILED + line.encode())
        except OSError:
            return 1
        return 1
    finally:
        if loop is not None:
            loop.close()
    return 0


if __name__ == "__main__":
    sys.exit(main())
