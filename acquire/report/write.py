"""From a store to the report."""

from __future__ import annotations

from collections.abc import Sequence
from math import isfinite
from pathlib import Path
from typing import Any

import numpy as np

from acquire.record import volts_of
from acquire.report import figures
from acquire.report.page import Picture, findings, page, picture, section, table
from acquire.results import pressure, raster, rotation
from acquire.results.quantity import Quantity, written
from acquire.results.summary import SHOWN, conditions
from acquire.store import StoredScan
from checks.observation import Observation
from checks.rotation_fit import PlaneResult

LISTED = (
    "mean effective radius",
    "effective radius at high frequency",
    "angle zero",
    "pivot offset",
    "beamwidth",
    "beam peak",
    "share of the peak read",
    "beam area",
    "beam centroid",
    "ellipticity",
    "direction of the major axis",
    "focal distance",
    "depth of focus",
    "positive peak",
    "negative peak",
    "positive peak pressure",
    "negative peak pressure",
    "pulse-pressure-squared integral",
    "pulse duration",
    "acoustic-working frequency",
    "pulse-intensity integral",
)


def report(stored: StoredScan) -> str:
    """The whole page.

    Raises:
        MeasurementError: the data do not suffice for any result; one line.
    """
    c, seen = stored.circumstances, stored.observations()
    quantities: list[Quantity]
    if c.scan_type == "rotation":
        results = rotation.rotation_results(seen, c)
        quantities = rotation.quantities(results, c)
        usable = results[0].response.frequencies_hz[results[0].response.usable]
        parts = rotation_sections(stored, results)
    else:
        from acquire.report.raster import sections

        result = raster.raster_result(seen, c)
        quantities = raster.quantities(result, c)
        usable = c.frequencies_hz
        parts = sections(result)
    quantities += pressure.quantities(stored, seen)
    return page(
        stored.job.scan.title or stored.job.scan.name,
        subtitle(stored),
        section("Findings", findings(stored.findings())),
        section("Numbers", numbers(quantities)),
        *budgets(quantities),
        *parts,
        section("Reference point", picture(_reference(stored, seen, usable))),
        section("Scan", table(("", ""), circumstances_rows(stored))),
    )


def rotation_sections(stored: StoredScan, results: Sequence[PlaneResult]) -> list[str]:
    """Sections of a rotation."""
    from acquire.report.rotation import sections

    return sections(results, stored.job.sensor.nominal_radius_mm)


def subtitle(stored: StoredScan) -> str:
    """What was measured, when, and whether it is complete."""
    a = stored.attributes
    state = "sealed" if stored.sealed else f"broken off after {len(stored.records)} points"
    return (
        f"sensor {stored.job.sensor.name}, source {stored.job.source.name}, bench {stored.job.bench.name}; "
        f"started {a['started_utc']}, {state}; truepivot {a['program_version']}"
    )


def numbers(quantities: Sequence[Quantity]) -> str:
    """The main quantities as a table."""
    rows = []
    for q in quantities:
        if q.name in LISTED:
            unit, factor = SHOWN.get(q.unit, (q.unit, 1.0))
            value = written(q.value, q.standard_uncertainty, factor)
            rows.append((q.name, conditions(q), f"{value} {unit}" if q.value is not None else "none", q.method))
    return table(("quantity", "conditions", "value ± standard uncertainty", "method"), rows)


def budgets(quantities: Sequence[Quantity]) -> list[str]:
    """The uncertainty budget of every quantity that has one, as a table."""
    parts = []
    for q in quantities:
        if q.budget is None:
            continue
        unit, factor = SHOWN.get(q.unit, (q.unit, 1.0))
        rows: list[tuple[str, ...]] = [
            (
                row.source,
                f"{row.given.value:.6g} {row.unit if row.unit != '1' else ''}".strip(),
                f"{row.given.u:.2g}",
                row.given.distribution,
                f"{row.given.freedom:.0f}" if isfinite(row.given.freedom) else "∞",
                f"{row.sensitivity:.3g}",
                f"{row.u * factor:.2g} {unit}",
            )
            for row in q.budget.rows
        ]
        k = q.budget.coverage_factor()
        rows.append(("combined", "", "", "", _freedom(q.budget.freedom), "", f"{q.budget.u * factor:.2g} {unit}"))
        rows.append((f"expanded, 95 %, k = {k:.2f}", "", "", "", "", "", f"{k * q.budget.u * factor:.2g} {unit}"))
        head = ("source", "value", "u", "distribution", "degrees of freedom", "sensitivity", "contribution")
        parts.append(section(f"Uncertainty of the {q.name} ({conditions(q)})", table(head, rows)))
    return parts


def _freedom(value: float) -> str:
    return f"{value:.0f}" if value < 1e4 else "∞"


def _reference(stored: StoredScan, seen: Sequence[Observation], usable_hz: Any) -> Picture:
    """Waveform and spectrum of the first reference point, or of the strongest point where there is none."""
    strongest = max(seen, key=lambda o: o.square_integral_v2s)
    chosen = next((o for o in seen if o.reference), strongest)
    record, c = stored.records[chosen.index], stored.circumstances
    volts = volts_of(record, stored.counts(chosen.index), chosen.offset_v)
    time = record.start_s + np.arange(volts.size, dtype=np.float64) * record.interval_s
    spectrum = np.abs(np.fft.rfft(volts * np.hanning(volts.size)))
    frequency = np.fft.rfftfreq(volts.size, record.interval_s)
    shown = frequency <= min(1.5 * c.frequencies_hz[-1], frequency[-1])
    level = 20 * np.log10(np.maximum(spectrum[shown], 1e-12 * spectrum.max()) / spectrum.max())
    gate_us = (float(time[c.gate.start]) * 1e6, float(time[min(c.gate.stop, time.size - 1)]) * 1e6)
    figure = figures.waveform_and_spectrum(
        time * 1e6, volts, gate_us, frequency[shown] / 1e6, level, np.asarray(usable_hz) / 1e6
    )
    what = "first reference point" if chosen.reference else "strongest point"
    return Picture(f"Waveform and spectrum of the {what} (point {chosen.index}).", figures.png(figure))


def circumstances_rows(stored: StoredScan) -> list[tuple[str, str]]:
    """How the scan was done."""
    c, scan = stored.circumstances, stored.job.scan
    warm = [r.temperature_c for r in stored.records]
    return [
        ("points", f"{len(stored.records)} of {c.planned_points}"),
        ("distance", f"{c.distance_m * 1e3:.2f} mm"),
        ("drive", f"{c.drive_hz / 1e6:g} MHz, {c.cycles} cycles, {stored.job.source.drive_v:g} V peak to peak"),
        ("averages", str(scan.capture.averages)),
        ("vertical range", f"{scan.capture.full_scale_v:g} V"),
        ("water", f"{min(warm):.2f} to {max(warm):.2f} °C"),
        ("pivot correction", f"x {c.pivot_x_m * 1e3:.3f} mm, z {c.pivot_z_m * 1e3:.3f} mm"),
        ("convention", rotation.CONVENTION),
    ]


def write_report(stored: StoredScan, path: Path) -> None:
    """Write the page to a file."""
    path.write_text(report(stored), "utf-8")
