"""A captured point as it goes to the recorder."""

from __future__ import annotations

from acquire.mover import Where
from acquire.plan import PlanPoint
from acquire.pose import Pivot
from acquire.record import PointRecord
from drivers.trace import Trace


def record_of(
    point: PlanPoint, pivot: Pivot, before: Where, after: Where, time_s: float, temperature_c: float, trace: Trace
) -> PointRecord:
    """All of a point but its counts; `time_s` from the start of the scan."""
    s = trace.scaling
    return PointRecord(
        index=point.index,
        plan_index=point.index,
        reference=point.reference,
        plane=point.plane,
        commanded=point.pose,
        before=before.element,
        after=after.element,
        carriage_commanded=pivot.carriage_for(point.pose),
        carriage_before=before.carriage,
        carriage_after=after.carriage,
        time_s=time_s,
        temperature_c=temperature_c,
        volts_per_count=s.volts_per_count,
        volts_at_zero=s.volts_at_zero,
        interval_s=s.interval_s,
        start_s=s.start_s,
        lowest=trace.lowest,
        highest=trace.highest,
        averages=trace.averages,
        full_scale_v=trace.full_scale_v,
    )
