"""A parent process that records points until it is killed.

`python -m tests.acquire.recording STORE PLANNED [continue]`

Prints how many points are stored when it begins, and whenever more have been announced as stored.
"""

from __future__ import annotations

import sys
import time
from pathlib import Path

from acquire.recorder import Recorder
from tests.acquire.making import SAMPLES, circumstances, counts_of, header, record_of


def main() -> None:
    """Record slowly enough that a kill comes in between."""
    import msgspec

    store, planned = Path(sys.argv[1]), int(sys.argv[2])
    continued = len(sys.argv) > 3
    decode = msgspec.msgpack.Decoder().decode
    with Recorder(store, header(), circumstances(planned), "int16", SAMPLES, planned, continued) as recorder:
        say(recorder.already_stored)
        for i in range(recorder.already_stored, planned):
            recorder.put(record_of(i, planned), counts_of(i, planned))
            for event in recorder.poll():
                body = decode(event) if isinstance(event, msgspec.Raw) else {}
                if body.get("type") == "stored":
                    say(body["last"] + 1)
            time.sleep(0.002)
        recorder.finish(sealed=True)


def say(points: int) -> None:
    """A line for the test."""
    sys.stdout.write(f"{points}\n")
    sys.stdout.flush()


if __name__ == "__main__":
    main()
