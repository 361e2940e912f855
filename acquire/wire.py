"""What passes between the daemon and its recorder: frames of one kind byte and a body."""

from __future__ import annotations

import msgspec
import numpy as np

from acquire.header import StoreHeader
from acquire.messages import FindingChanged
from acquire.record import PointRecord
from checks.observation import Circumstances

# to the recorder
POINT = b"P"  # a record; its counts stand in the next slot of the ring
FINISH = b"F"  # body b"1": seal, b"0": broken off
# from the recorder
READY = b"S"  # body: how many points are in the store already, and when the last one was captured
EVENTS = b"E"  # a list of encoded events, which the daemon passes on as they are
FINDINGS = b"J"  # a list of findings, at which the daemon looks
FREED = b"R"  # body: how many slots may be used again
FAILED = b"X"  # body: one line
FINISHED = b"Z"

encode_record = msgspec.msgpack.Encoder().encode
decode_record = msgspec.msgpack.Decoder(PointRecord).decode
encode = msgspec.msgpack.Encoder().encode
decode_raw = msgspec.msgpack.Decoder(list[msgspec.Raw]).decode
decode_findings = msgspec.msgpack.Decoder(list[FindingChanged]).decode


class Setup:
    """All that a recorder needs to begin; pickled once at the start."""

    def __init__(
        self,
        path: str,
        header: StoreHeader,
        circumstances: Circumstances,
        dtype: str,
        samples: int,
        planned: int,
        slots: int,
        continue_store: bool,
    ) -> None:
        self.path = path
        self.header = header
        self.circumstances = circumstances
        self.dtype = np.dtype(dtype)
        self.samples = samples
        self.planned = planned
        self.slots = slots
        self.continue_store = continue_store
