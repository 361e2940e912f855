"""One captured point as it travels from the bench to the recorder: everything but the counts themselves."""

from __future__ import annotations

import msgspec

Five = tuple[float, float, float, float, float]


class PointRecord(msgspec.Struct, frozen=True, array_like=True):
    """Metadata of a point. Poses are (x, y, z, theta, phi) in metres and radians.

    `commanded`, `before`, `after` are poses of the element centre; `carriage_*` are the same in the coordinates
    of the stage (with the pivot correction applied). `time_s` counts from the start of the scan.
    """

    index: int
    plan_index: int
    reference: bool
    plane: int
    commanded: Five
    before: Five
    after: Five
    carriage_commanded: Five
    carriage_before: Five
    carriage_after: Five
    time_s: float
    temperature_c: float
    volts_per_count: float
    volts_at_zero: float
    interval_s: float
    start_s: float
    lowest: int
    highest: int
    averages: int
    full_scale_v: float
