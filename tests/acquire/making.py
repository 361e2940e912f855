"""Small scans made of nothing, for tests of what happens after the transfer."""

from __future__ import annotations

from typing import Any

import numpy as np
from numpy.typing import NDArray

from acquire.header import StoreHeader
from acquire.record import PointRecord
from checks.comb import comb_lines, side_lines
from checks.observation import Circumstances, Gate
from profiles.load import load_bench, load_scan, load_sensor, load_source

SAMPLES = 600
INTERVAL_S = 1e-8
START_S = 78e-6
DRIVE_HZ = 2.25e6


def circumstances(planned: int, **changes: Any) -> Circumstances:
    """A rotation with a burst that fills much of the record."""
    values: dict[str, Any] = {
        "scan_type": "rotation",
        "frequencies_hz": comb_lines(DRIVE_HZ, 10e6, 1 / INTERVAL_S),
        "side_lines_hz": side_lines(DRIVE_HZ, 8),
        "drive_hz": DRIVE_HZ,
        "cycles": 8,
        "sample_interval_s": INTERVAL_S,
        "record_start_s": START_S,
        "gate": Gate(200, 600, 0, 150),
        "averages": 1,
        "distance_m": 0.12,
        "source_radius_m": 6e-3,
        "focal_length_m": None,
        "nominal_radius_m": 2e-4,
        "reflector_distance_m": 0.09,
        "highest_wanted_hz": 9e6,
        "planned_points": planned,
    }
    return Circumstances(**(values | changes))


def theta_of(index: int, planned: int) -> float:
    """Angles over +-40 degrees, a reference first."""
    return 0.0 if index == 0 else float(np.radians(-40 + 80 * index / planned))


def counts_of(index: int, planned: int, dtype: str = "int16") -> NDArray[Any]:
    """A burst whose second harmonic fades with angle, and noise of its own for every point."""
    rng = np.random.default_rng(index)
    t = START_S + np.arange(SAMPLES) * INTERVAL_S
    inside = (t > 80.4e-6) & (t < 80.4e-6 + 8 / DRIVE_HZ)
    fade = np.cos(theta_of(index, planned)) ** 4
    wave = np.sin(2 * np.pi * DRIVE_HZ * t) + 0.4 * fade * np.sin(4 * np.pi * DRIVE_HZ * t)
    scale = 60 if dtype == "int8" else 15_000
    return np.asarray(scale * (wave * inside + 0.01 * rng.standard_normal(SAMPLES)), dtype)


def record_of(index: int, planned: int, **changes: Any) -> PointRecord:
    """The record that goes with `counts_of`."""
    pose = (0.0, 0.0, 0.12, theta_of(index, planned), 0.0)
    values: dict[str, Any] = {
        "index": index,
        "plan_index": index,
        "reference": index == 0,
        "plane": 0,
        "commanded": pose,
        "before": pose,
        "after": pose,
        "carriage_commanded": pose,
        "carriage_before": pose,
        "carriage_after": pose,
        "time_s": 0.1 * index,
        "temperature_c": 21.0 + 1e-3 * index,
        "volts_per_count": 1e-5,
        "volts_at_zero": 1e-4,
        "interval_s": INTERVAL_S,
        "start_s": START_S,
        "lowest": -32768,
        "highest": 32767,
        "averages": 1,
        "full_scale_v": 0.4,
    }
    return PointRecord(**(values | changes))


def header() -> StoreHeader:
    """The shipped demonstration's profiles."""
    scan = load_scan("demo-rotation-fast")
    return StoreHeader(
        bench=load_bench("demo-tank").model_dump(mode="json"),
        sensor=load_sensor(scan.sensor).model_dump(mode="json"),
        source=load_source(scan.source).model_dump(mode="json"),
        scan=scan.model_dump(mode="json"),
    )
