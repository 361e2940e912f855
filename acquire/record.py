"""One captured point as it travels from the bench to the recorder: everything but the counts themselves."""

from __future__ import annotations

from typing import Any

import msgspec
import numpy as np
from numpy.typing import NDArray

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


def volts_of(record: PointRecord, counts: NDArray[Any], offset_v: float) -> NDArray[np.float64]:
    """Counts of a stored point as volts without the offset, shape as given."""
    return np.asarray(counts * record.volts_per_count + record.volts_at_zero - offset_v, np.float64)
