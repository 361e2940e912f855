"""Moving the carriage so that the element centre comes to the poses of a plan, backlash taken up."""

from __future__ import annotations

from dataclasses import dataclass

from acquire.plan import AXIS_NUMBER
from acquire.pose import Pivot
from acquire.record import Five
from acquire.travel import approach_from, plays_of
from drivers.link import StopAsked
from drivers.stage import MotionStage
from profiles.bench import Bench
from profiles.model import AXES, Axis

MOVE_S = 120.0


@dataclass(frozen=True)
class Where:
    """A reported position, of the carriage and of the element centre."""

    carriage: Five
    element: Five


class Mover:
    """A stage with the pivot correction of a scan."""

    def __init__(self, stage: MotionStage, pivot: Pivot, bench: Bench) -> None:
        self._stage = stage
        self._pivot = pivot
        self._plays = plays_of(bench)
        self._under_way = False

    def start(self, pose: Five) -> None:
        """Send the stage off; where there is backlash to take up, first to a place below the target."""
        carriage = self._pivot.carriage_for(pose)
        self._send(approach_from(carriage, self._plays) or carriage)

    def arrive(self, pose: Five, cancelled: StopAsked) -> Where:
        """Until the element centre stands still at `pose`; the stage is started unless it is under way there."""
        if not self._under_way:
            self.start(pose)
        position = self._still(cancelled)
        carriage = self._pivot.carriage_for(pose)
        if approach_from(carriage, self._plays) is not None:
            self._send(carriage)
            position = self._still(cancelled)
        return self.where(position)

    def end_move(self, cancelled: StopAsked) -> None:
        """Let a move that is under way come to its end, so that no answer of the stage is left over."""
        if self._under_way:
            self._still(cancelled)

    def forget(self) -> None:
        """The stage has a new connection: nothing that was asked over the old one is answered any more."""
        self._under_way = False

    def stand(self) -> Where:
        """Ask where the stage stands."""
        return self.where(self._stage.position())

    def where(self, position: dict[Axis, float]) -> Where:
        """A position that the stage reported; axes that it has not stand at zero."""
        x, y, z, theta, phi = (position.get(axis, 0.0) for axis in AXES)
        carriage = (x, y, z, theta, phi)
        return Where(carriage, self._pivot.element_at(carriage))

    def _send(self, carriage: Five) -> None:
        self._stage.start_move({axis: carriage[AXIS_NUMBER[axis]] for axis in self._stage.axes})
        self._under_way = True

    def _still(self, cancelled: StopAsked) -> dict[Axis, float]:
        position = self._stage.finish_move(MOVE_S, cancelled)
        self._under_way = False
        return position
