"""Which part of a record is analysed: after the trigger's pick-up, before the first echo, all of the burst."""

from __future__ import annotations

from math import ceil, floor, hypot, sqrt

from checks.errors import MeasurementError
from checks.observation import Gate

PICKUP_S = 3e-6  # after the trigger; common practice, no source
GUARD_S = 0.3e-6
SWING_S = 0.7e-6  # an element centre 1 mm off the axis arrives so much earlier or later
RING_CYCLES = 4.0  # source and sensor ring on after the drive has ended; common practice, no source
FEWEST_QUIET = 64


def echo_free_s(distance_m: float, reflector_distance_m: float, speed_m_s: float) -> float:
    """Time after the arrival until the first reflection from a wall at that distance from the beam axis.

    sqrt(z² + 4 h²) - z = c tau, IEC 62127-1, 5.2.2 (read in the translation GOST IEC 62127-1-2015, equation 8).
    """
    return (sqrt(distance_m**2 + 4 * reflector_distance_m**2) - distance_m) / speed_m_s


def plan_gate(
    *,
    nearest_m: float,
    farthest_m: float,
    lateral_m: float,
    speed_m_s: float,
    frequency_hz: float,
    cycles: int,
    reflector_distance_m: float,
    record_start_s: float,
    interval_s: float,
    samples: int,
) -> Gate:
    """Gate that holds the whole burst at every point of a scan, and the quiet part before it.

    `nearest_m` and `farthest_m` are the least and largest distance from the plane of the source, `lateral_m` the
    largest distance from the beam axis plus the radius of the source.

    Raises:
        MeasurementError: the burst does not fit into record or echo-free time, or nothing quiet is recorded.
    """
    first = nearest_m / speed_m_s - SWING_S
    last_arrival = hypot(farthest_m, lateral_m) / speed_m_s + SWING_S
    end = last_arrival + (cycles + RING_CYCLES) / frequency_hz
    echo = farthest_m / speed_m_s + echo_free_s(farthest_m, reflector_distance_m, speed_m_s)
    record_end = record_start_s + samples * interval_s
    needed = last_arrival + cycles / frequency_hz
    if needed > echo:
        raise MeasurementError(
            f"the burst ends {needed * 1e6:.2f} us after the trigger, but the first echo is due at "
            f"{echo * 1e6:.2f} us: fewer cycles, a shorter distance, or a larger tank"
        )
    if needed > record_end:
        raise MeasurementError(
            f"the burst ends {needed * 1e6:.2f} us after the trigger, but the record at "
            f"{record_end * 1e6:.2f} us: more points or a lower sample rate"
        )
    start = floor((first - record_start_s) / interval_s)
    stop = min(ceil((min(end, echo) - record_start_s) / interval_s), samples)
    quiet_start = max(0, ceil((PICKUP_S - record_start_s) / interval_s))
    quiet_stop = start - ceil(GUARD_S / interval_s)
    if start < 0 or quiet_stop - quiet_start < FEWEST_QUIET:
        short = (FEWEST_QUIET - (quiet_stop - quiet_start)) * interval_s
        raise MeasurementError(
            f"too little is recorded before the burst to know the noise: raise lead_us by {short * 1e6:.2f}"
        )
    return Gate(start, stop, quiet_start, quiet_stop)
