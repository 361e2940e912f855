"""Results of a store as quantities, as JSON, and as a table for people."""

from __future__ import annotations

import json
from collections.abc import Iterator, Sequence
from typing import Any

from acquire.results.quantity import Quantity, written
from acquire.store import StoredScan

SHOWN = {"m": ("mm", 1e3), "deg": ("°", 1.0), "dB": ("dB", 1.0), "V": ("mV", 1e3), "1": ("", 1.0)} | {
    "m2": ("mm²", 1e6),
    "Pa": ("kPa", 1e-3),
    "s": ("µs", 1e6),
    "Hz": ("MHz", 1e-6),
}


def quantities_of(stored: StoredScan) -> list[Quantity]:
    """All quantities of a store.

    Raises:
        MeasurementError: the data do not suffice; one line.
    """
    c, seen = stored.circumstances, stored.observations()
    if c.scan_type == "rotation":
        from acquire.results import rotation

        found = rotation.quantities(rotation.rotation_results(seen, c), c)
    else:
        from acquire.results import raster

        found = raster.quantities(raster.raster_result(seen, c), c)
    from acquire.results import pressure

    return found + pressure.quantities(stored, seen)


def as_json(stored: StoredScan, quantities: Sequence[Quantity]) -> str:
    """One JSON object: what was measured, with which program, and the list of quantities and findings."""
    document: dict[str, Any] = {
        "store": stored.path.name,
        "program_version": stored.attributes["program_version"],
        "started_utc": stored.attributes["started_utc"],
        "sealed": stored.sealed,
        "points": len(stored.records),
        "scan": stored.job.scan.name,
        "sensor": stored.job.sensor.name,
        "source": stored.job.source.name,
        "quantities": [q.as_mapping() for q in quantities],
        "findings": stored.findings(),
    }
    return json.dumps(document, indent=1, allow_nan=False)


def lines(quantities: Sequence[Quantity]) -> Iterator[str]:
    """A line for each quantity; the response itself, angle by angle, is left to JSON and pictures."""
    for q in quantities:
        if q.name == "directional response":
            continue
        unit, factor = SHOWN.get(q.unit, (q.unit, 1.0))
        value = written(q.value, q.standard_uncertainty, factor)
        told = f"{value} {unit}".strip() if q.value is not None else f"none ({q.method})"
        yield f"{q.name:<34} {conditions(q):<44} {told}"
        if q.name == "averaging" and q.value is not None:
            yield f"  {q.method}"


def conditions(q: Quantity) -> str:
    """Conditions as people write them."""
    parts = []
    for key, value in q.conditions.items():
        if key == "frequency_hz" and isinstance(value, float):
            parts.append(f"{value / 1e6:.4g} MHz")
        elif key == "plane_deg":
            parts.append(f"plane {value:g}°")
        elif key == "level_db":
            parts.append(f"{value:g} dB")
        elif key == "correction_applied_m" and isinstance(value, float):
            parts.append(f"after {value * 1e3:.3f} mm" if value else "uncorrected")
        else:
            parts.append(str(value))
    return ", ".join(parts)
