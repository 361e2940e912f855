"""One recorder at a time on a store."""

from __future__ import annotations

import errno
import fcntl
import os
from pathlib import Path
from time import monotonic, sleep

WAIT_S = 30.0  # a recorder whose daemon was killed may still be making its last points durable
LOOK_S = 0.05
NO_LOCKS_HERE = (errno.EBADF, errno.ENOLCK, errno.ENOTSUP, errno.EINVAL)


class StoreHold:
    """Holds the folder of a store from its making to `close`; it falls with the process, however that ends.

    Raises:
        ValueError: another recorder holds it, and does not let go; one line.
    """

    def __init__(self, path: Path, wait_s: float = WAIT_S) -> None:
        self._descriptor = os.open(path, os.O_RDONLY)
        deadline = monotonic() + wait_s
        while not self._taken():
            if monotonic() > deadline:
                self.close()
                raise ValueError(f"{path} is being recorded by another daemon: stop that scan first")
            sleep(LOOK_S)

    def _taken(self) -> bool:
        try:
            fcntl.flock(self._descriptor, fcntl.LOCK_EX | fcntl.LOCK_NB)
        except BlockingIOError:
            return False
        except OSError as error:
            if error.errno not in NO_LOCKS_HERE:  # some network file systems lock no folders
                raise
        return True

    def close(self) -> None:
        """Let go."""
        os.close(self._descriptor)
