"""The generator's sync line: pulses that trigger the oscilloscope while the output is on."""

from __future__ import annotations

from collections.abc import Callable
from math import ceil


class SyncLine:
    """Pulses at `since_s + k * period_s`, k = 0, 1, ..., or none."""

    def __init__(self) -> None:
        self._since_s = 0.0
        self._period_s: float | None = None
        self._listeners: list[Callable[[], None]] = []

    @property
    def period_s(self) -> float | None:
        """None: no pulses."""
        return self._period_s

    def listen(self, changed: Callable[[], None]) -> None:
        """`changed` is called after every change."""
        self._listeners.append(changed)

    def set(self, since_s: float, period_s: float | None) -> None:
        """Pulses from `since_s` on, or none any more."""
        self._since_s, self._period_s = since_s, period_s
        for changed in self._listeners:
            changed()

    def next_pulse(self, from_s: float) -> float | None:
        """First pulse at or after that time."""
        if self._period_s is None:
            return None
        # a pulse that rounding puts just before the time asked for is that pulse
        periods = max(0, ceil((from_s - self._since_s) / self._period_s - 1e-9))
        return self._since_s + periods * self._period_s
