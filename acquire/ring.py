"""Shared memory for counts on their way from the daemon to the recorder: slots used in turn.

The memory is an unnamed file, so nothing is left behind whichever process dies, and however.
"""

from __future__ import annotations

import mmap
import os
import tempfile
from typing import Any

import numpy as np
from numpy.typing import NDArray


class Ring:
    """`slots` rows of `samples` counts on a shared file descriptor."""

    def __init__(self, descriptor: int, slots: int, samples: int, dtype: np.dtype[Any]) -> None:
        self.descriptor = descriptor
        self.slots = slots
        self._map = mmap.mmap(descriptor, slots * samples * dtype.itemsize)
        self.rows: NDArray[Any] = np.frombuffer(self._map, dtype).reshape(slots, samples)

    def close(self) -> None:
        """Let go of the memory."""
        self.rows = np.empty((0, 0), self.rows.dtype)
        self._map.close()
        os.close(self.descriptor)


def new_descriptor(size: int) -> int:
    """An unnamed file of that size, in memory where the system can."""
    if hasattr(os, "memfd_create"):
        descriptor = os.memfd_create("truepivot-ring")
    else:
        with tempfile.TemporaryFile() as file:
            descriptor = os.dup(file.fileno())
    os.ftruncate(descriptor, size)
    return descriptor
