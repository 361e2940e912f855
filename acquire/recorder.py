"""The daemon's handle on the recorder: a process of its own that makes points durable and judges them.

The daemon's thread only copies counts into a ring and sends a small record; everything slow happens beside it.
"""

from __future__ import annotations

import os
import pickle
import subprocess
import sys
from pathlib import Path
from time import monotonic
from types import TracebackType
from typing import Any, Self

import msgspec
import numpy as np
from numpy.typing import NDArray

from acquire import wire
from acquire.channel import Channel, channel_pair
from acquire.header import StoreHeader
from acquire.messages import Event
from acquire.record import PointRecord
from acquire.ring import Ring, new_descriptor
from checks.observation import Circumstances

RING_BYTES = 64 << 20
FEWEST_SLOTS, MOST_SLOTS = 4, 256  # records of so many points fit into the pipe, so sending one never waits
TIMING = 0.01  # of a sample interval: by so little may the times of a record differ
START_S, FINISH_S, STALL_S = 60.0, 600.0, 60.0
ONE = (  # one thread for the same sums in the same order, one heap for all threads
    *("OPENBLAS_NUM_THREADS", "OMP_NUM_THREADS", "MKL_NUM_THREADS", "BLIS_NUM_THREADS"),
    "MALLOC_ARENA_MAX",
)


class RecorderFailed(Exception):
    """The recorder cannot go on; what was announced as stored is safe. The message is one line."""


class Recorder:
    """Starts the process with the block and ends it with the block.

    Raises:
        RecorderFailed: the store cannot be made, or is not one that can be continued.
    """

    def __init__(
        self,
        path: Path,
        header: StoreHeader,
        circumstances: Circumstances,
        dtype: str,
        samples: int,
        planned_points: int,
        continue_store: bool = False,
    ) -> None:
        kind = np.dtype(dtype)
        slots = max(FEWEST_SLOTS, min(MOST_SLOTS, RING_BYTES // (samples * kind.itemsize)))
        self._setup = wire.Setup(
            str(path), header, circumstances, dtype, samples, planned_points, slots, continue_store
        )
        descriptor = new_descriptor(slots * samples * kind.itemsize)
        self._ring = Ring(descriptor, slots, samples, kind)
        self._free = slots
        self._next = 0
        self._failed: str | None = None
        self._events: list[Event | msgspec.Raw] = []
        self._pipe: Channel
        self._process: subprocess.Popen[bytes]
        self.already_stored = self._expected = 0
        self.last_time_s = 0.0  # of the last point that is there already

    def __enter__(self) -> Self:
        self._pipe, theirs = channel_pair()
        descriptors = (theirs.fileno(), self._ring.descriptor)
        command = [sys.executable, "-m", "acquire.recorder_process", *map(str, descriptors)]
        environment = os.environ | dict.fromkeys(ONE, "1")
        # a session of its own: a Ctrl-C at the terminal is for the daemon, which then ends the recorder in order
        self._process = subprocess.Popen(
            command, pass_fds=descriptors, env=environment, start_new_session=True, stdin=subprocess.DEVNULL
        )
        theirs.close()
        try:
            self._pipe.send(pickle.dumps(self._setup))
            stored, last_time_s = self._wait_for(wire.READY, START_S).split()
            self.already_stored = self._expected = int(stored)
            self.last_time_s = float(last_time_s)
        except BaseException:
            self.close()
            raise
        return self

    def __exit__(self, kind: type[BaseException] | None, error: BaseException | None, at: TracebackType | None) -> None:
        self.close()

    def put(self, record: PointRecord, counts: NDArray[Any]) -> None:
        """Hand a point over; waits only when the recorder is a whole ring behind.

        Raises:
            RecorderFailed: it has failed or does not go on, or the point does not belong to this scan.
        """
        self._check(record, counts)
        deadline = monotonic() + STALL_S
        while not self._free:
            if monotonic() > deadline:
                raise RecorderFailed(f"the recorder has stored nothing for {STALL_S:.0f} s: is the disk answering?")
            self._receive(0.1)
        self._ring.rows[self._next] = counts
        self._next = (self._next + 1) % self._ring.slots
        self._free -= 1
        self._expected += 1
        self._send(wire.POINT + wire.encode_record(record))

    def _check(self, record: PointRecord, counts: NDArray[Any]) -> None:
        """All points of a scan have one record length, interval and start, and come in the planned order."""
        s, c = self._setup, self._setup.circumstances
        if record.index != self._expected or record.index >= s.planned:
            raise RecorderFailed(f"point {record.index} of {s.planned} came where {self._expected} was due")
        if counts.shape != (s.samples,) or not np.can_cast(counts.dtype, s.dtype, "equiv"):
            got, want = f"{counts.size} samples of {counts.dtype}", f"{s.samples} of {s.dtype}"
            raise RecorderFailed(f"point {record.index} has {got} instead of {want}: leave the oscilloscope alone")
        late_s = record.start_s - c.record_start_s + (s.samples - 1) * (record.interval_s - c.sample_interval_s)
        if max(abs(late_s), abs(record.start_s - c.record_start_s)) > TIMING * c.sample_interval_s:
            raise RecorderFailed(
                f"point {record.index} begins at {record.start_s:.9g} s, {record.interval_s:.9g} s between samples; "
                f"the scan at {c.record_start_s:.9g} s, {c.sample_interval_s:.9g} s: leave the oscilloscope alone"
            )

    def poll(self) -> list[Event | msgspec.Raw]:
        """Events since the last call; does not wait.

        Raises:
            RecorderFailed: it has failed.
        """
        self._receive()
        events, self._events = self._events, []
        return events

    def finish(self, sealed: bool, timeout_s: float = FINISH_S) -> list[Event | msgspec.Raw]:
        """No more points; wait until the store is complete. Returns the last events.

        Raises:
            RecorderFailed: it could not be completed; the journal keeps what was announced.
        """
        if sealed and self._expected < self._setup.planned:
            raise RecorderFailed(f"only {self._expected} of {self._setup.planned} points are there: not sealed")
        self._send(wire.FINISH + (b"1" if sealed else b"0"))
        self._wait_for(wire.FINISHED, timeout_s)
        events, self._events = self._events, []
        return events

    def close(self) -> None:
        """End the process; without `finish` it keeps what it has in the journal."""
        self._pipe.close()
        try:
            self._process.wait(STALL_S)
        except subprocess.TimeoutExpired:
            self._process.kill()
            self._process.wait()
        if self._ring.rows.size:
            self._ring.close()

    def _send(self, frame: bytes) -> None:
        try:
            self._pipe.send(frame)
        except OSError as error:
            self._drain_last_words()
            raise RecorderFailed(self._failed or "the recorder ended unexpectedly") from error

    def _drain_last_words(self) -> None:
        try:
            while self._pipe.ready(0.5):
                self._take(self._pipe.receive())
        except (EOFError, OSError, RecorderFailed):
            return

    def _receive(self, timeout_s: float = 0.0) -> None:
        try:
            while self._pipe.ready(timeout_s):
                self._take(self._pipe.receive())
                timeout_s = 0.0
        except (EOFError, OSError) as error:
            raise RecorderFailed(self._failed or "the recorder ended unexpectedly") from error

    def _wait_for(self, kind: bytes, timeout_s: float) -> bytes:
        deadline = monotonic() + timeout_s
        try:
            while self._pipe.ready(max(0.0, deadline - monotonic())):
                frame = self._pipe.receive()
                if frame[:1] == kind:
                    return frame[1:]
                self._take(frame)
        except (EOFError, OSError) as error:
            raise RecorderFailed(self._failed or "the recorder ended unexpectedly") from error
        raise RecorderFailed(f"the recorder did not answer within {timeout_s:.0f} s")

    def _take(self, frame: bytes) -> None:
        kind, body = frame[:1], frame[1:]
        if kind == wire.EVENTS:
            self._events += wire.decode_raw(body)
        elif kind == wire.FINDINGS:
            self._events += wire.decode_findings(body)
        elif kind == wire.FREED:
            self._free += int(body)
        elif kind == wire.FAILED:
            self._failed = body.decode()
            raise RecorderFailed(self._failed)
