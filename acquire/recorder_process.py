"""The recorder's process: points in; journal, observations, findings and chunks out.

One thread takes points, makes them durable and judges them; another writes full chunks. At the end of its input,
however that came about, it keeps what it has and ends.
"""

from __future__ import annotations

import errno
import gc
import pickle
import shutil
import signal
import socket
import sys
import traceback
from pathlib import Path
from time import monotonic, sleep
from typing import Any

import zarr
from numpy.typing import NDArray

from acquire import wire
from acquire.channel import Channel
from acquire.chunks import ChunkWriter
from acquire.header import read_attributes
from acquire.hold import StoreHold
from acquire.journal import Journal, journal_folder
from acquire.judge import Judge, changes_as_mappings, finding_event, point_event
from acquire.layout import create, points_in_chunk, put_attributes
from acquire.messages import Event, PointsStored
from acquire.record import PointRecord
from acquire.recovery import Recovered, recover
from acquire.ring import Ring
from acquire.thinned import thinned

SYNC_POINTS = 64  # made durable at the latest after so many points
SYNC_S = 0.05  # or after so long
BATCH = 64
FLOW_S, GATHER_S = 0.05, 0.008  # batches that close together; how long to gather the next one
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
        self._batch_at = 0.0
        self._drawn = 0.0
        self._judge = Judge(setup.circumstances)
        already = self._prepare()
        stored = len(already.records) if already else 0
        self._announced = stored - 1
        self._journal = Journal(self._path, points_in_chunk(self._path), stored)
        self._chunks = ChunkWriter(self._path, self._journal, setup.samples, setup.dtype)
        if already:
            put_attributes(self._path, {"finding_changes": []}, dropped=("points",))
            self._refeed(already)
        last_time_s = already.records[-1].time_s if already and already.records else 0.0
        self._pipe.send(wire.READY + f"{stored} {last_time_s!r}".encode())

    def _prepare(self) -> Recovered | None:
        """A new store, or an old one whose points are all gathered."""
        setup, shape = self._setup, (self._setup.planned, self._setup.samples)
        if setup.continue_store:
            read_attributes(self._path)
            self._hold = StoreHold(self._path)
            return recover(self._path, setup.header, setup.dtype, shape)
        if self._path.exists():
            raise ValueError(f"{self._path} exists already: choose another name, or continue it")
        if (journal := journal_folder(self._path)).exists():
            raise ValueError(f"{journal} keeps points of an earlier scan: move it away, or choose another name")
        self._path.mkdir(parents=True)
        self._hold = StoreHold(self._path)
        attributes = setup.header.attributes(setup.circumstances)
        try:
            create(self._path, attributes, setup.circumstances, setup.dtype.name, shape)
        except OSError:
            shutil.rmtree(self._path)  # nothing is in it, and half a store would be in the way
            raise
        return None

    def _refeed(self, already: Recovered) -> None:
        """Judge what is there again, so that the checks go on as if nothing had happened; store what is not yet."""
        for records, counts in already.blocks():
            rows = [self._chunks.place(r.index, c) for r, c in zip(records, counts, strict=True)]
            seen, _ = self._judge.take(records, rows)
            in_store = not any(already.counts.in_journal(r.index) for r in records)
            self._chunks.add(records, seen, durable=in_store)

    def run(self) -> None:
        """Until told to finish, or the daemon is gone; what it sent before it went is kept."""
        while True:
            left = SYNC_S - (monotonic() - self._oldest) if self._unsynced else None
            if left is not None and (left <= 0 or not self._pipe.ready(left)):
                self._sync()
                continue
            frames, ended = self._frames(left)
            points = [wire.decode_record(f[1:]) for f in frames if f[:1] == wire.POINT]
            if points:
                self._take(points)
            if frames and frames[-1][:1] == wire.FINISH:
                self._finish(sealed=frames[-1][1:] == b"1")
                return
            if ended:
                self._sync()
                return

    def _frames(self, wait_s: float | None) -> tuple[list[bytes], bool]:
        """What has come, a batch at most; and whether that was the last.

        While points flow fast a few are gathered first: eight cost as much to reduce as one.
        """
        frames: list[bytes] = []
        try:
            while len(frames) < BATCH and self._pipe.ready(0.0 if frames else wait_s):
                frames.append(self._pipe.receive())
                if frames[-1][:1] == wire.FINISH:
                    break
                if len(frames) == 1 and monotonic() - self._batch_at < FLOW_S:
                    sleep(GATHER_S)
            self._batch_at = monotonic()
        except (EOFError, OSError):
            return frames, True
        return frames, False

    def _take(self, records: list[PointRecord]) -> None:
        """A batch of points: durable soon, judged now. It is split where a chunk ends."""
        while records:
            room = self._chunks.size - records[0].index % self._chunks.size
            part, records = records[:room], records[room:]
            rows = []
            for record in part:
                rows.append(self._chunks.place(record.index, self._ring.rows[self._slot]))
                self._slot = (self._slot + 1) % self._ring.slots
            self._pipe.tell(wire.FREED + str(len(part)).encode())
            if not self._unsynced:
                self._oldest = monotonic()
            self._journal.add(part, rows)
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
        self._pipe.tell(wire.EVENTS + wire.encode(events))
        if changes:
            self._pipe.tell(wire.FINDINGS + wire.encode([finding_event(c) for c in changes]))
        if self._chunks.ends(records[-1].index):
            self._sync()  # before the chunk's rows are used again
        self._chunks.add(records, seen)

    def _sync(self) -> None:
        if self._unsynced:
            self._journal.sync()
            count, self._unsynced = self._unsynced, 0
            self._announced += count
            event = PointsStored(last=self._announced, count=count)
            self._pipe.tell(wire.EVENTS + wire.encode([event]))

    def _finish(self, sealed: bool) -> None:
        """Complete the store; the journal is no longer needed afterwards."""
        self._sync()
        changes = self._judge.finish()
        self._chunks.flush()
        closing: dict[str, Any] = {
            "sealed": sealed,
            "points": self._announced + 1,
            "finding_changes": changes_as_mappings(self._judge.changes),
        }
        put_attributes(self._path, closing)
        self._journal.remove()
        if changes:
            self._pipe.tell(wire.FINDINGS + wire.encode([finding_event(c) for c in changes]))
        self._pipe.tell(wire.FINISHED)
        self._pipe.flush()

    def close(self) -> None:
        """End the thread, close the files."""
        self._chunks.close()
        self._journal.close()
        self._hold.close()


def told(error: OSError) -> str:
    """One line for the user."""
    if error.errno in (errno.ENOSPC, errno.EDQUOT):
        return "the disk is full: free some space, then continue the scan; every announced point is safe"
    return f"storing failed: {error.strerror or error}"


def main() -> int:
    """Entry point: two file descriptors, of the pipe and of the ring."""
    for number in (signal.SIGINT, signal.SIGTERM, signal.SIGHUP):
        signal.signal(number, signal.SIG_IGN)  # they are for the daemon, whose end this process sees
    zarr.config.set({"threading.max_workers": 1})  # chunks are written one at a time
    pipe = Channel(socket.socket(fileno=int(sys.argv[1])))
    setup: wire.Setup = pickle.loads(pipe.receive())  # from the parent process only
    ring = Ring(int(sys.argv[2]), setup.slots, setup.samples, setup.dtype)
    loop = None
    try:
        loop = RecorderLoop(pipe, setup, ring)
        gc.freeze()  # what is there now stays: later collections need not look at it
        loop.run()
    except (OSError, ValueError) as error:
        return failed(pipe, told(error) if isinstance(error, OSError) else str(error))
    except Exception as error:  # a fault of the program: the traceback for us, a line for the user
        traceback.print_exc()
        return failed(pipe, f"the recorder failed ({type(error).__name__}: {error}); every announced point is safe")
    finally:
        if loop is not None:
            loop.close()
    return 0


def failed(pipe: Channel, line: str) -> int:
    """Say why, after all that was still to be said."""
    pipe.tell(wire.FAILED + line.encode())
    pipe.flush()
    return 1


if __name__ == "__main__":
    sys.exit(main())
