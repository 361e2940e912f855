"""What one process alone may hold: an endpoint, an instrument. It falls free with the process, however that ends."""

from __future__ import annotations

import fcntl
import os
from collections.abc import Iterable, Iterator
from contextlib import ExitStack, contextmanager
from hashlib import sha256
from pathlib import Path


class OwnedByAnother(Exception):
    """Another process holds it; one line with the cure."""


@contextmanager
def held(lock: Path, what: str, owner: str) -> Iterator[None]:
    """Hold a lock file, with `owner` written in it for others to read.

    The file stays: removing it would let one process lock a file that another has just replaced.

    Raises:
        OwnedByAnother: somebody else holds it.
    """
    lock.parent.mkdir(parents=True, exist_ok=True)
    with lock.open("a+") as file:
        try:
            fcntl.flock(file, fcntl.LOCK_EX | fcntl.LOCK_NB)
        except OSError as error:
            file.seek(0)
            by = file.read().strip() or "another process"
            raise OwnedByAnother(f"{what} belongs to {by} already: end that one first") from error
        file.truncate(0)
        file.write(owner)
        file.flush()
        yield
        file.truncate(0)


def is_held(lock: Path) -> bool:
    """Whether a process that lives holds it."""
    try:
        with lock.open("r") as file:
            fcntl.flock(file, fcntl.LOCK_SH | fcntl.LOCK_NB)
    except FileNotFoundError:
        return False
    except OSError:
        return True
    return False


@contextmanager
def held_instruments(addresses: Iterable[str], folder: Path, owner: str) -> Iterator[None]:
    """Hold every instrument, so that no two daemons of this user talk to the same one.

    Raises:
        OwnedByAnother: a daemon has one of them.
    """
    with ExitStack() as stack:
        for address in addresses:
            device = address.removeprefix("serial://")
            one = os.path.realpath(device) if device.startswith("/") else address  # a link is the same line
            name = f"instrument-{sha256(one.encode()).hexdigest()[:16]}.lock"
            stack.enter_context(held(folder / name, f"the instrument at {address}", owner))
        yield
