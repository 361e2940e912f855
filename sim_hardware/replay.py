"""Serving a bank: what was measured at a pose is answered there, and what never was is refused."""

from __future__ import annotations

from collections import deque
from collections.abc import Mapping
from dataclasses import dataclass

import numpy as np

from profiles.model import AXES, LINEAR_AXES, Axis
from profiles.units import DEG, MM
from sim_hardware.acquired import Shot
from sim_hardware.bank import Bank, Floats
from sim_hardware.digitise import Codes
from sim_hardware.motion import AxisLimits, Motion
from sim_hardware.scpi_errors import ScpiError

Pose = list[float]
Key = tuple[int, ...]
STEP = [(MM if a in LINEAR_AXES else DEG) * 1e-4 for a in AXES]  # last decimal of a stage's words


def _key(pose: Pose) -> Key:
    return tuple(round(value / step) for value, step in zip(pose, STEP, strict=True))


def _nearest(places: Floats, pose: Pose) -> int | None:
    """Index of the place that `pose` is, if a value half-way between two decimals may be rounded either way."""
    if not len(places):
        return None
    off = np.abs(places - pose) / STEP
    near = int(off.max(axis=1).argmin())
    return near if off[near].max() <= 1.01 else None


class Replay:
    """What of a strict bank has been served, and what comes next; a bank that is not strict is served in turn.

    A visit to a pose is a move to it and all that happens until the next move. Whatever is captured during a visit
    is the same stored point, so that a trial capture costs nothing; the next visit with a capture gets the next one.

    Args:
        bank: the stored points.
        play: (5,) overrun by which a stage takes up backlash before it goes to a target; a place below the target
            by this much may be passed, though nothing was measured there.
        floor: (5,) low ends of travel, below which no overrun goes.
    """

    def __init__(self, bank: Bank, play: Pose, floor: Pose) -> None:
        self.bank = bank
        self.strict = bool(bank.strict)
        self._left: dict[Key, deque[int]] = {}
        for index, place in enumerate(bank.carriage):
            pose: Pose = place.tolist()
            self._left.setdefault(_key(pose), deque()).append(index)
        below = np.maximum(bank.carriage - play, np.minimum(bank.carriage, floor))
        self._passed: Floats = below[np.any(below != bank.carriage, axis=1)]
        self._served = 0
        self._pose: Key | None = None
        self._captured = False  # during this visit

    def _find(self, pose: Pose) -> Key | None:
        key = _key(pose)
        if key in self._left:
            return key
        near = _nearest(self.bank.carriage, pose)
        return None if near is None else _key(self.bank.carriage[near].tolist())

    def allows(self, pose: Pose) -> bool:
        """Something measured there is left to be served, or the stage passes there on its way."""
        key = self._find(pose)
        if key is not None and len(self._left[key]) > (self._captured and key == self._pose):
            return True
        return _nearest(self._passed, pose) is not None

    def go(self, pose: Pose) -> None:
        """The stage is told to go there: a visit ends, another begins."""
        if not self.strict:
            return
        if self._captured and self._pose is not None:
            self._left[self._pose].popleft()
        self._pose = self._find(pose)
        self._captured = self._in_memory = False

    def _here(self) -> int | None:
        """The point that belongs to this visit."""
        return self._left[self._pose][0] if self._pose is not None and self._left[self._pose] else None

    def reported(self) -> Floats | None:
        """What the stage reported before the capture and, once there was one at this visit, after it."""
        here = self._here()
        if not self.strict or here is None:
            return None
        stored: Floats = (self.bank.reported_after if self._captured else self.bank.reported_before)[here]
        return stored

    def temperature_c(self) -> float:
        """Of the point that will be served next; after the last one, its own."""
        following, here = self._served, self._here()
        if here is not None:
            following = here + 1 if self._captured else here
        last = len(self.bank) - 1
        following = min(following, last) if self.strict else following % (last + 1)
        return float(self.bank.temperature_c[following])

    def ready(self) -> bool:
        """A capture can be served here."""
        return not self.strict or self._here() is not None

    def serve(self) -> int:
        """The point whose counts are served."""
        here = self._here() if self.strict else self._served % len(self.bank)
        assert here is not None
        self._served = here + 1 if self.strict else self._served + 1
        self._captured = True
        return here


@dataclass(frozen=True)
class BankCapture:
    """A stored capture. Reference points are zero, so that the scaling arrives bit for bit."""

    bank: Bank
    index: int
    x_reference: int = 0

    @property
    def points(self) -> int:
        """Samples."""
        return int(self.bank.counts.shape[1])

    @property
    def averages(self) -> int:
        """Triggers averaged."""
        return int(self.bank.averages[self.index])

    @property
    def interval_s(self) -> float:
        """Between samples."""
        return float(self.bank.interval_s[self.index])

    @property
    def start_s(self) -> float:
        """Of the first sample after the trigger."""
        return float(self.bank.start_s[self.index])

    def y_reference(self, bits: int) -> int:  # noqa: ARG002 - the same for all
        """Zero."""
        return 0

    def scale(self, channel: int, bits: int) -> tuple[float, float]:  # noqa: ARG002
        """As stored."""
        return float(self.bank.volts_per_count[self.index]), float(self.bank.volts_at_zero[self.index])

    def codes(self, channel: int, bits: int) -> Codes:  # noqa: ARG002
        """As stored, widened if need be; raises -221 when the samples asked for are too narrow."""
        counts: Codes = self.bank.counts[self.index]
        if bits < 8 * counts.dtype.itemsize:
            raise ScpiError(-221, "the bank holds 16-bit samples")
        return counts if bits == 8 * counts.dtype.itemsize else counts.astype(np.int16)

    def prepare(self) -> bool:
        """Nothing to do."""
        return False


class BankSource:
    """Captures of a bank."""

    def __init__(self, replay: Replay) -> None:
        self._replay = replay

    def arm(self) -> None:
        """Raises -300 when nothing measured at this pose is left."""
        if not self._replay.ready():
            raise ScpiError(-300, "no stored capture left for this pose")

    def foresee(self, shot: Shot) -> bool:  # noqa: ARG002
        """Nothing to do."""
        return False

    def take(self, shot: Shot) -> BankCapture:  # noqa: ARG002
        """The next one."""
        return BankCapture(self._replay.bank, self._replay.serve())


class BankMotion(Motion):
    """A stage that, when the bank is strict, goes only where the bank allows it."""

    replay: Replay

    def may_go(self, targets: Mapping[Axis, float]) -> bool:
        """Within travel, and in the bank."""
        return super().may_go(targets) and (not self.replay.strict or self.replay.allows(self._pose(targets)))

    def go_together(self, targets: Mapping[Axis, float], feed: float | None) -> None:
        """Also tell the bank."""
        pose = self._pose(targets)
        super().go_together(targets, feed)
        self.replay.go(pose)

    def go_each(self, targets: Mapping[Axis, float], limits: Mapping[Axis, AxisLimits]) -> None:
        """Also tell the bank."""
        pose = self._pose(targets)
        super().go_each(targets, limits)
        self.replay.go(pose)

    def reported(self) -> dict[Axis, float]:
        """As it was reported then, once the stage has arrived."""
        stored = None if self.moving() else self.replay.reported()
        if stored is None:
            return super().reported()
        return {a: float(v) for a, v in zip(AXES, stored, strict=True) if a in self.limits}

    def _pose(self, targets: Mapping[Axis, float]) -> Pose:
        """All five coordinates; axes not named stay where they are told to be."""
        return [targets[a] if a in targets else self.target(a) for a in AXES]
