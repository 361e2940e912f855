"""The stage by its own word: where it stood against where it was sent, and whether it stood still."""

from __future__ import annotations

from collections.abc import Iterable
from math import degrees

from checks.finding import Change, Finding, Severity, Size
from checks.observation import Circumstances, Observation, Pose
from checks.standing import Standing

HALT_FACTOR = 100.0  # so many tolerances away the stage is not where the limits were checked for


def _apart(a: Pose, b: Pose) -> tuple[float, float]:
    """Largest difference of the places (m) and of the angles (rad)."""
    linear = max(abs(a.x - b.x), abs(a.y - b.y), abs(a.z - b.z))
    return linear, max(abs(a.theta - b.theta), abs(a.phi - b.phi))


class MotionCheck:
    """`stage.off-target` and `stage.not-still`.

    Model: reported pose equals commanded pose, and does not change while the capture is taken. Statistic: the
    largest difference along any axis. Threshold: the bench's tolerances, which stand well above the scatter of
    its reports, so that a bench in order is never accused (common practice, no source).
    """

    def __init__(self, circumstances: Circumstances) -> None:
        self._linear = circumstances.linear_tolerance_m
        self._angular = circumstances.angular_tolerance_rad
        self._off = _Tally()
        self._moving = _Tally()

    def update(self, seen: Observation) -> Iterable[Change]:
        """One more point."""
        changes: list[Change] = []
        linear, angular = _apart(seen.reported_before, seen.commanded)
        if self._off.take(linear / self._linear, angular / self._angular, linear, angular, seen.index):
            changes += self._off.standing.now(self._off_target(), seen.index)
        linear, angular = _apart(seen.reported_after, seen.reported_before)
        if self._moving.take(linear / self._linear, angular / self._angular, linear, angular, seen.index):
            changes += self._moving.standing.now(self._not_still(), seen.index)
        return changes

    def finish(self) -> Iterable[Change]:
        """The last tally."""
        return [*self._off.standing.last_word(), *self._moving.standing.last_word()]

    def _off_target(self) -> Finding:
        t = self._off
        far = max(t.linear / self._linear, t.angular / self._angular) > HALT_FACTOR
        severity: Severity = "halt" if far else "caution"
        return Finding(
            code="stage.off-target",
            severity=severity,
            summary=f"the stage reports up to {t.linear * 1e6:.1f} um and {degrees(t.angular):.3f}° away from where it "
            "was sent",
            sizes=t.sizes(self._linear, self._angular),
            points=t.points(),
            consequence="these points do not stand at the pose under which they are stored as commanded",
            remedy="look for an obstacle, a slipping axis or too short a settling time; the reported pose is stored",
        )

    def _not_still(self) -> Finding:
        t = self._moving
        return Finding(
            code="stage.not-still",
            severity="caution",
            summary=f"the stage moved by up to {t.linear * 1e6:.1f} um and {degrees(t.angular):.3f}° during captures",
            sizes=t.sizes(self._linear, self._angular),
            points=t.points(),
            consequence="the averages of these points mix several places, high frequencies read low",
            remedy="raise settle_ms of the stage's profile or dwell_ms of the scan",
        )


class _Tally:
    """Points beyond the tolerance, and the largest departure."""

    def __init__(self) -> None:
        self.standing = Standing(tally=True)
        self.linear = self.angular = 0.0
        self._first = self._last = self._count = 0

    def take(self, linear_ratio: float, angular_ratio: float, linear: float, angular: float, at: int) -> bool:
        if linear_ratio <= 1 and angular_ratio <= 1:
            return False
        if not self._count:
            self._first = at
        self._last, self._count = at, self._count + 1
        self.linear, self.angular = max(self.linear, linear), max(self.angular, angular)
        return True

    def points(self) -> tuple[int, int, int]:
        return self._first, self._last, self._count

    def sizes(self, linear: float, angular: float) -> tuple[Size, ...]:
        return Size("distance", self.linear, linear / 2, "m"), Size("angle", self.angular, angular / 2, "rad")
