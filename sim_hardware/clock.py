"""Simulated time: realistic, faster by a factor, or jumping so that nothing is waited for."""

from __future__ import annotations

import heapq
import time
from collections.abc import Callable
from dataclasses import dataclass, field
from itertools import count


@dataclass(order=True)
class Due:
    """Something that happens at a simulated time; `cancel` takes it back."""

    at_s: float
    order: int
    call: Callable[[], None] = field(compare=False)
    cancelled: bool = field(default=False, compare=False)

    def cancel(self) -> None:
        """It will not happen."""
        self.cancelled = True


class Timeline:
    """The simulated clock and what is due on it.

    Args:
        speed: simulated seconds per real second; None: nothing is waited for, and time jumps from one due
            thing to the next whenever `run_due` is called.
        real: the real clock, in seconds; injected so that tests need not wait.
    """

    def __init__(self, speed: float | None = 1.0, real: Callable[[], float] = time.monotonic) -> None:
        if speed is not None and not speed > 0:
            raise ValueError(f"speed {speed} must be above 0")
        self._speed = speed
        self._real = real
        self._zero = real()
        self._jumped = 0.0
        self._running: float | None = None
        self._heap: list[Due] = []
        self._count = count()

    @property
    def at_once(self) -> bool:
        """Nothing is waited for."""
        return self._speed is None

    def now(self) -> float:
        """Simulated seconds since the start. Within something due: the time for which it was due."""
        if self._running is not None:
            return self._running
        if self._speed is None:
            return self._jumped
        return (self._real() - self._zero) * self._speed

    def schedule(self, at_s: float, call: Callable[[], None]) -> Due:
        """`call` runs at simulated time `at_s`, in order of time and then of scheduling."""
        due = Due(at_s, next(self._count), call)
        heapq.heappush(self._heap, due)
        return due

    def run_due(self) -> bool:
        """Run what is due by now (everything, when nothing is waited for); says whether something ran."""
        if not self._heap:
            return False
        ran = False
        limit = None if self._speed is None else self.now()
        while self._heap and (limit is None or self._heap[0].at_s <= limit):
            due = heapq.heappop(self._heap)
            if due.cancelled:
                continue
            if self._speed is None:
                self._jumped = max(self._jumped, due.at_s)
            self._running = due.at_s
            try:
                due.call()
            finally:
                self._running = None
            ran = True
        return ran

    def real_seconds_to_next(self) -> float | None:
        """Real time until something is due; None when nothing is."""
        while self._heap and self._heap[0].cancelled:
            heapq.heappop(self._heap)
        if not self._heap:
            return None
        if self._speed is None:
            return 0.0
        return max(0.0, (self._heap[0].at_s - self.now()) / self._speed)
