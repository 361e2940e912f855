"""What the checks see: the circumstances of a scan, and one observation per point, in the order of capture."""

from __future__ import annotations

from dataclasses import dataclass
from typing import Literal

import numpy as np
from numpy.typing import NDArray

ScanType = Literal["rotation", "raster"]


@dataclass(frozen=True)
class Pose:
    """Position of the element centre (m) and its angles (rad)."""

    x: float
    y: float
    z: float
    theta: float = 0.0
    phi: float = 0.0


@dataclass(frozen=True)
class Gate:
    """The part of the record that is analysed, and the quiet part before the arrival; sample indices."""

    start: int
    stop: int
    quiet_start: int
    quiet_stop: int


@dataclass(frozen=True)
class Circumstances:
    """All that a check may know about a scan before its first point.

    Attributes:
        frequencies_hz: shape (K,), the comb lines at which each point is analysed, ascending; the first is the
            drive frequency and multiples of it follow.
        side_lines_hz: shape (2,), two lines within the main lobe about the drive frequency, for group delay.
        pivot_x_m, pivot_z_m: the pivot correction that was applied while scanning (zero: none).
        speed_u: relative standard uncertainty of the speed of sound, from that of the temperature.
    """

    scan_type: ScanType
    frequencies_hz: NDArray[np.float64]
    side_lines_hz: NDArray[np.float64]
    drive_hz: float
    cycles: int
    sample_interval_s: float
    record_start_s: float
    gate: Gate
    averages: int
    distance_m: float
    source_radius_m: float
    focal_length_m: float | None
    nominal_radius_m: float
    reflector_distance_m: float
    highest_wanted_hz: float
    planned_points: int
    pivot_x_m: float = 0.0
    pivot_z_m: float = 0.0
    linear_tolerance_m: float = 5e-6
    angular_tolerance_rad: float = 2e-4
    speed_u: float = 2e-4


@dataclass(frozen=True)
class Observation:
    """One point, reduced.

    Attributes:
        index: position in the order of capture, from 0.
        reference: the point is a revisit of the reference pose (angle zero, or middle of the raster).
        plane: index of the plane of rotation, 0 where there is one.
        commanded: pose that was asked of the element centre.
        reported_before, reported_after: pose of the element centre computed from the stage's reports, before
            the capture was armed and after it was complete.
        time_s: seconds since the scan began.
        temperature_c: water temperature.
        components: shape (K,) complex, volts; Fourier components at `frequencies_hz`, time origin at the
            trigger, scaled so that a steady sine of amplitude A filling the gate gives |component| = A.
        side_components: shape (2,) complex, same scaling, at `side_lines_hz`.
        component_noise_v: shape (K,), standard deviation of the real (and of the imaginary) part of each
            component that noise alone makes, estimated from the quiet part of the record.
        peak_v, trough_v: largest and smallest voltage in the gate, offset removed.
        square_integral_v2s: integral of the squared voltage over the gate, V² s.
        noise_rms_v: rms in the quiet part. offset_v: mean in the quiet part.
        clipped_high, clipped_low: samples of the whole record at the upper and lower rail.
        range_use: largest excursion from the middle of the digitiser's range, over half its range (0 to 1).
    """

    index: int
    reference: bool
    plane: int
    commanded: Pose
    reported_before: Pose
    reported_after: Pose
    time_s: float
    temperature_c: float
    components: NDArray[np.complex128]
    side_components: NDArray[np.complex128]
    component_noise_v: NDArray[np.float64]
    peak_v: float
    trough_v: float
    square_integral_v2s: float
    noise_rms_v: float
    offset_v: float
    clipped_high: int
    clipped_low: int
    range_use: float
