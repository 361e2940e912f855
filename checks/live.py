"""The live checks of a scan, in the fixed order in which they are asked."""

from __future__ import annotations

from checks.arrival import SharedTracker
from checks.finding import Check
from checks.live_angle import AngleCheck
from checks.live_drift import DriftCheck
from checks.live_motion import MotionCheck
from checks.live_nulls import ElementNullCheck, SpectrumCheck
from checks.live_pivot import PivotCheck
from checks.live_reach import ReachCheck
from checks.live_signal import RangeCheck, SignalCheck
from checks.observation import Circumstances

# chance that a check speaks in a scan in which nothing is wrong; shared out over its points (Bonferroni)
FALSE_ALARMS_PER_SCAN = 1e-3


def make_checks(circumstances: Circumstances) -> list[Check]:
    """New checks for a scan; the same circumstances give checks that say the same of the same points."""
    rate = FALSE_ALARMS_PER_SCAN / max(1, circumstances.planned_points)
    checks: list[Check] = [
        RangeCheck(),
        SignalCheck(circumstances),
        MotionCheck(circumstances),
        DriftCheck(circumstances, rate),
        SpectrumCheck(circumstances),
    ]
    if circumstances.scan_type == "rotation":
        tracker = SharedTracker(circumstances)
        checks += [
            PivotCheck(circumstances, rate, tracker),
            AngleCheck(circumstances, rate),
            ElementNullCheck(circumstances, tracker),
            ReachCheck(circumstances),
        ]
    return checks
