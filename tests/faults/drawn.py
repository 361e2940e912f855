"""Benches drawn at random within what a laboratory may have: source, element, mechanics, electronics, water."""

from __future__ import annotations

from dataclasses import dataclass, replace
from typing import Any, Literal, cast

import numpy as np

from acquire.prepare import Job
from profiles.bench import Bench
from profiles.load import find, load_scan, load_sensor, load_source, read
from profiles.scan import Scan
from profiles.sensor import Sensor
from profiles.source import Source
from sim_hardware.truth import Truth

EDGES = ("rigid", "soft", "unbaffled")
WATER_M_S = 1485.0
SOURCE_U, THERMOMETER_U_C = 0.03, 0.1  # as the analysis takes them: a source radius and a thermometer are not exact


@dataclass(frozen=True)
class Drawn:
    """A bench whose truth is known, and the scan to be done on it."""

    number: int
    job: Job
    truth: Truth
    seed: int

    def altered(self, **tables: dict[str, Any]) -> Drawn:
        """The same bench with some keys of the truth's tables changed, such as `mechanics={...}`."""
        plain = self.truth.model_dump()
        for table, changes in tables.items():
            plain[table] = plain[table] | changes if isinstance(changes, dict) else changes
        return replace(self, truth=Truth.model_validate(plain))


def drawn(number: int, family: int = 0) -> Drawn:
    """Bench number `number` of a family; families have no bench in common, so that tuning and scoring stay apart.

    Distances lie between 1.2 and 3 times the length of the near field, the element's nominal radius is off by up to a
    fifth, and the burst is asked of a source with harmonics up to the twelfth or so.
    """
    random = np.random.default_rng((family, number))

    def between(low: float, high: float) -> float:
        return float(random.uniform(low, high))

    drive_mhz = float(random.choice([1.0, 1.5, 2.25, 3.5, 5.0]))
    wavelength_mm = WATER_M_S / drive_mhz * 1e-3
    source_mm = between(8, 16) * wavelength_mm**0.5 / 2
    z_mm = float(np.clip(between(1.2, 3.0) * source_mm**2 / wavelength_mm, 60, 180))
    radius_mm = between(0.08, 0.5)
    nominal_mm = round(radius_mm * between(0.85, 1.2), 3)
    edge = cast(Literal["rigid", "soft", "unbaffled"], str(random.choice(EDGES)))
    cycles = int(random.integers(8, 16))
    highest = min(12.6 * drive_mhz, between(18, 36))
    source = Source.model_validate(
        load_source("plane-2p25").model_dump()
        | {"name": "drawn", "radius_mm": source_mm, "frequency_mhz": drive_mhz, "cycles": cycles}
    )
    sensor = Sensor.model_validate(
        load_sensor("needle-0p4").model_dump() | {"name": "drawn", "nominal_radius_mm": nominal_mm}
    )
    bench_tables = read(find("bench", "demo-tank"))
    bench_tables["geometry"]["reflector_distance_mm"] = 120.0
    temperature_c = between(16, 27)
    lead_us = 5.0
    record_us = lead_us + (cycles + 6) / drive_mhz + 4
    span = between(60, 100)
    step = span / round(span / between(1.0, 2.5))
    scan = Scan.model_validate(
        load_scan("demo-rotation-fast").model_dump(mode="json")
        | {
            "name": "drawn",
            "highest_mhz": highest,
            "position": {"z_mm": z_mm},
            "rotation": {"span_deg": span, "step_deg": step},
            "capture": {"averages": 16, "sample_rate_mhz": 125.0, "points": round(record_us * 125), "lead_us": lead_us},
        }
    )
    truth = {
        "seed": int(random.integers(2**31)),
        "source": {
            "radius_mm": source_mm * (1 + SOURCE_U * float(random.standard_normal())),
            "beam_exponent": between(0.6, 0.9),
            "reference_distance_mm": z_mm,
            "reference_pressure_kpa": between(400, 1200),
            "harmonic_phase_deg": between(-45, -15),
        },
        "element": {
            "radius_mm": radius_mm,
            "edge": edge,
            "sensitivity_nv_per_pa": 50 * (radius_mm / 0.2) ** 2,
            "corner_mhz": between(30, 80),
        },
        "mechanics": {
            "pivot_offset_mm": [between(-0.4, 0.4), 0.0, between(-0.4, 0.4)],
            "angle_zero_deg": between(-0.6, 0.6),
            "readback_sigma_um": between(0.1, 0.8),
            "readback_sigma_mdeg": between(0.1, 0.8),
        },
        "tank": {
            "temperature_c": temperature_c,
            "temperature_drift_c_per_h": between(-0.2, 0.2),
            "thermometer_error_c": THERMOMETER_U_C * float(random.standard_normal()),
        },
        "electronics": {
            "noise_uv": float(np.exp(between(np.log(40), np.log(400)))),
            "offset_mv": between(-1, 1),
            "jitter_ns": between(0, 1),
            "pickup_mv": between(0, 8),
            "drive_drift_percent_per_h": between(-1, 1),
        },
    }
    bench = Bench.model_validate({k: v for k, v in bench_tables.items() if k != "simulation"})
    return Drawn(number, Job(bench, sensor, source, scan), Truth.model_validate(truth), int(random.integers(2**31)))
