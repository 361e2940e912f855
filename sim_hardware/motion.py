"""Kinematics of a stage, without input or output: where each axis is told to be, and where it really is.

Metres and radians. Each axis keeps the moves that it made, so that positions of the recent past can be asked for.
What the controller counts and what is true differ by backlash, lost steps, ringing and an unknown start.
"""

from __future__ import annotations

from collections.abc import Iterable, Mapping
from dataclasses import dataclass
from functools import partial
from math import cos, exp, log, pi, sqrt
from typing import NamedTuple

import numpy as np

from profiles.bench import AxisTable, LinearAxis
from profiles.model import AXES, LINEAR_AXES, Axis
from profiles.units import DEG, MM, MS, UM
from sim_hardware.capture import Carriage
from sim_hardware.clock import Due, Timeline
from sim_hardware.trapezoid import STANDING, Brake, Law, Trapezoid
from sim_hardware.truth import MechanicsTruth

REMEMBERED_MOVES = 64
STILL_M = 0.1 * UM  # ringing below this is over
RINGING_ARM_M = 0.1  # a rotary axis rings by the linear amplitude at this radius
HOMING_SPEED = 0.5  # of the axis's own
SAME_PLACE = 1e-10  # metres or radians: not worth a move
POWER_ON_PLACE = 0.3  # of the travel, from its low end


@dataclass(frozen=True)
class AxisLimits:
    """Travel and speed in SI."""

    low: float
    high: float
    speed: float
    acceleration: float

    @property
    def reference(self) -> float:
        """Where homing ends: zero, or the low end of a travel without zero."""
        return 0.0 if self.low <= 0.0 <= self.high else self.low


def axis_limits(axes: AxisTable) -> dict[Axis, AxisLimits]:
    """Of a bench profile, for the axes that it has."""
    limits: dict[Axis, AxisLimits] = {}
    for name in axes.present():
        axis = getattr(axes, name)
        if isinstance(axis, LinearAxis):
            values = (axis.low_mm, axis.high_mm, axis.speed_mm_per_s, axis.acceleration_mm_per_s2)
            limits[name] = AxisLimits(*(v * MM for v in values))
        else:
            values = (axis.low_deg, axis.high_deg, axis.speed_deg_per_s, axis.acceleration_deg_per_s2)
            limits[name] = AxisLimits(*(v * DEG for v in values))
    return limits


def axis_overrun(axes: AxisTable, name: Axis) -> float:
    """By how much the bench profile goes below a target to take up backlash, in SI; 0 for an axis it has not."""
    axis = getattr(axes, name)
    if axis is None:
        return 0.0
    return float(axis.backlash_mm * MM if isinstance(axis, LinearAxis) else axis.backlash_deg * DEG)


class Move(NamedTuple):
    """One move of one axis: commanded position `start + scale * law.travelled(t - t0)`."""

    t0: float
    start: float
    scale: float
    law: Law
    play: float  # where the driven side stood at t0: it follows only when the backlash is taken up
    slip: float  # true position less what the controller counts
    number: int  # moves of this axis so far

    @property
    def end_s(self) -> float:
        """When it has arrived."""
        return self.t0 + self.law.duration_s

    def commanded(self, t: float) -> float:
        """Position by the controller's count."""
        return self.start + self.scale * self.law.travelled(t - self.t0)

    def driven(self, t: float, backlash: float) -> float:
        """Position behind the backlash, without slip: exact when approached upwards."""
        counted = self.commanded(t)
        return min(max(self.play, counted), counted + backlash)


class Motion:
    """All axes of a stage. Axes that the stage has not stand at zero."""

    def __init__(
        self, limits: Mapping[Axis, AxisLimits], mechanics: MechanicsTruth, timeline: Timeline, seed: int = 0
    ) -> None:
        self.limits = dict(limits)
        self.homed: set[Axis] = set()
        self._timeline = timeline
        self._noise = np.random.default_rng((seed, 0x5747))
        self._mechanics = mechanics
        self._tau = mechanics.settle_time_ms * MS
        amplitude = mechanics.settle_amplitude_um * UM if self._tau > 0 else 0.0
        self._settle_s = self._tau * log(amplitude / STILL_M) if amplitude > STILL_M else 0.0
        self._ringing = {a: amplitude if a in LINEAR_AXES else amplitude / RINGING_ARM_M for a in AXES}
        self._backlash = {
            a: mechanics.backlash_mm * MM if a in LINEAR_AXES else mechanics.backlash_deg * DEG for a in AXES
        }
        self._sigma = {
            a: mechanics.readback_sigma_um * UM if a in LINEAR_AXES else mechanics.readback_sigma_mdeg * DEG / 1000
            for a in AXES
        }
        self._homing: dict[Axis, Due] = {}
        self._tracks: dict[Axis, list[Move]] = {
            a: [Move(0.0, 0.0, 0.0, STANDING, 0.0, r.low + POWER_ON_PLACE * (r.high - r.low), 0)]
            for a, r in self.limits.items()
        }

    # what is asked

    def may_go(self, targets: Mapping[Axis, float]) -> bool:
        """Whether all targets are within travel; a rounding error beyond it is forgiven."""
        return all(
            axis in self.limits and self.limits[axis].low - 1e-9 <= value <= self.limits[axis].high + 1e-9
            for axis, value in targets.items()
        )

    def target(self, axis: Axis) -> float:
        """Where the last move that was asked for ends."""
        track = self._tracks.get(axis)
        return track[-1].commanded(track[-1].end_s) if track else 0.0

    def end_s(self, axes: Iterable[Axis] | None = None) -> float:
        """When the last move that was asked for has arrived; 0 for one that never moved."""
        return max((self._tracks[a][-1].end_s for a in (axes or self._tracks)), default=0.0)

    def moving(self, axes: Iterable[Axis] | None = None) -> bool:
        """An axis is on its way now, or will be."""
        return self.end_s(axes) > self._timeline.now()

    def reported(self) -> dict[Axis, float]:
        """What the controller reads back now: its count, the ringing, and the noise of the readback."""
        t = self._timeline.now()
        return {a: self._at(a, t).commanded(t) + self._rings(a, t) + self._readback_error(a) for a in self._tracks}

    def carriage(self, t: float) -> Carriage:
        """Where it really stands at simulated time `t`, now or in the recent past."""
        return Carriage(**{a: self._true(a, t) if a in self._tracks else 0.0 for a in AXES})

    def still_between(self, early_s: float, late_s: float) -> bool:
        """No axis moved or rang between the two times."""
        for axis in self._tracks:
            move = self._at(axis, early_s)
            if move.end_s + self._settle_s > early_s or self._at(axis, late_s) is not move:
                return False
        return True

    # what is done

    def go_together(self, targets: Mapping[Axis, float], feed: float | None) -> None:
        """All axes on one straight line, after the moves asked for before; None: as fast as the axes allow.

        `feed` is the speed along the path of the linear axes when one of them moves, else along the rotary ones.
        """
        deltas = {a: d for a, v in targets.items() if abs(d := v - self.target(a)) > SAME_PLACE}
        if not deltas:
            return
        speed = min(self.limits[a].speed / abs(d) for a, d in deltas.items())
        if feed is not None:
            path = [d for a, d in deltas.items() if a in LINEAR_AXES] or list(deltas.values())
            speed = min(speed, feed / sqrt(sum(d * d for d in path)))
        acceleration = min(self.limits[a].acceleration / abs(d) for a, d in deltas.items())
        law = Trapezoid.plan(speed, acceleration)
        start = max(self._timeline.now(), self.end_s())
        for axis, delta in deltas.items():
            self._append(axis, start, delta, law)
        self._announce(start + law.duration_s)

    def go_each(self, targets: Mapping[Axis, float], limits: Mapping[Axis, AxisLimits]) -> None:
        """Each axis for itself, now; one that is moving brakes first."""
        self.stop(targets)
        for axis, value in targets.items():
            delta = value - self.target(axis)
            if abs(delta) <= SAME_PLACE:
                continue
            law = Trapezoid.plan(limits[axis].speed / abs(delta), limits[axis].acceleration / abs(delta))
            self._append(axis, max(self._timeline.now(), self.end_s((axis,))), delta, law)
        self._announce(self.end_s(targets))

    def stop(self, axes: Iterable[Axis] | None = None) -> None:
        """Brake along the path; moves asked for but not begun are forgotten, and so is homing."""
        t = self._timeline.now()
        for axis in tuple(axes or self._tracks):
            self._abandon(axis, t)
            last = self._tracks[axis][-1]
            if last.end_s > t:
                brake = Brake(last.law.speed(t - last.t0), last.law.acceleration)
                self._turn(axis, t, last.scale, brake)
        self._announce(self.end_s(axes))

    def halt(self) -> None:
        """Stand still without braking: the position is lost."""
        t = self._timeline.now()
        for axis in self._tracks:
            self._abandon(axis, t)
            self._turn(axis, t, 0.0, STANDING)
        self.homed.clear()

    def home(self, axes: Iterable[Axis] | None = None) -> None:
        """Seek the reference of each axis; there the count is set right."""
        wanted = tuple(axes or self._tracks)
        self.stop(wanted)
        start = max(self._timeline.now(), self.end_s(wanted))
        for axis in wanted:
            limit, last = self.limits[axis], self._tracks[axis][-1]
            self.homed.discard(axis)
            delta = limit.reference - last.slip - self.target(axis)
            law: Law = STANDING
            if delta != 0.0:
                law = Trapezoid.plan(HOMING_SPEED * limit.speed / abs(delta), limit.acceleration / abs(delta))
            self._turn(axis, start, delta, law)
            self._homing[axis] = self._timeline.schedule(start + law.duration_s, partial(self._arrive, axis))
        self._announce(self.end_s(wanted))

    def _arrive(self, axis: Axis) -> None:
        t, reference = self._timeline.now(), self.limits[axis].reference
        self._homing.pop(axis, None)
        self.homed.add(axis)
        self._keep(axis, Move(t, reference, 0.0, STANDING, reference, 0.0, self._tracks[axis][-1].number))

    def _append(self, axis: Axis, start_s: float, delta: float, law: Law) -> None:
        last = self._tracks[axis][-1]
        number = last.number + 1
        slip = last.slip
        for lost in self._mechanics.lost_steps:
            if lost.axis == axis and lost.onset_move == number:
                slip += (lost.size_mm or 0.0) * MM + (lost.size_deg or 0.0) * DEG
        play = last.driven(last.end_s, self._backlash[axis])
        self._keep(axis, Move(start_s, self.target(axis), delta, law, play, slip, number))

    def _turn(self, axis: Axis, t: float, scale: float, law: Law) -> None:
        """From where it is at `t`, go on by another law; no new move."""
        last = self._tracks[axis][-1]
        play = last.driven(t, self._backlash[axis])
        self._keep(axis, last._replace(t0=t, start=last.commanded(t), scale=scale, law=law, play=play))

    def _keep(self, axis: Axis, move: Move) -> None:
        track = self._tracks[axis]
        track.append(move)
        if len(track) > REMEMBERED_MOVES:
            del track[: REMEMBERED_MOVES // 2]

    def _abandon(self, axis: Axis, t: float) -> None:
        track = self._tracks[axis]
        while len(track) > 1 and track[-1].t0 > t:
            track.pop()
        due = self._homing.pop(axis, None)
        if due is not None:
            due.cancel()

    def _announce(self, end_s: float) -> None:
        """Arrival and coming to rest are things for which one may wait."""
        if end_s > self._timeline.now():
            self._timeline.schedule(end_s, _nothing)
            if self._settle_s > 0:
                self._timeline.schedule(end_s + self._settle_s, _nothing)

    def _at(self, axis: Axis, t: float) -> Move:
        track = self._tracks[axis]
        for move in reversed(track):
            if move.t0 <= t:
                return move
        return track[0]

    def _true(self, axis: Axis, t: float) -> float:
        move = self._at(axis, t)
        return move.driven(t, self._backlash[axis]) + move.slip + self._rings(axis, t)

    def _rings(self, axis: Axis, t: float) -> float:
        amplitude, move = self._ringing[axis], self._at(axis, t)
        since = t - move.end_s
        if amplitude == 0.0 or move.scale == 0.0 or not 0.0 <= since < 30 * self._tau:
            return 0.0
        return (amplitude if move.scale > 0 else -amplitude) * exp(-since / self._tau) * cos(2 * pi * since / self._tau)

    def _readback_error(self, axis: Axis) -> float:
        sigma = self._sigma[axis]
        return float(self._noise.normal(0.0, sigma)) if sigma > 0 else 0.0


def _nothing() -> None:
    pass
