"""Whether a scan, its sensor, its source and a bench fit together; all that does not, at once."""

from __future__ import annotations

from profiles.bench import Bench
from profiles.scan import Scan
from profiles.sensor import Sensor
from profiles.source import Source


def misfits(scan: Scan, bench: Bench, sensor: Sensor, source: Source) -> list[str]:
    """One line for each contradiction between the profiles; empty when they fit."""
    problems = _axes(scan, bench)
    wanted = scan.highest_mhz
    if wanted is not None and wanted > sensor.highest_mhz:
        problems.append(
            f"scan {scan.name}: highest_mhz: {wanted} given; sensor {sensor.name} reaches {sensor.highest_mhz}"
        )
    top = source.frequency_mhz * source.highest_harmonic
    if wanted is not None and wanted > top:
        problems.append(f"scan {scan.name}: highest_mhz: {wanted} given; source {source.name} offers up to {top}")
    burst_us = source.cycles / source.frequency_mhz
    record_us = scan.capture.points / scan.capture.sample_rate_mhz
    if record_us < burst_us + scan.capture.lead_us:
        problems.append(
            f"scan {scan.name}: capture: the record lasts {record_us:.3g} us; lead and burst need "
            f"{burst_us + scan.capture.lead_us:.3g} us: more points or a lower sample_rate_mhz"
        )
    return problems


def _axes(scan: Scan, bench: Bench) -> list[str]:
    problems = []
    present = bench.axes.present()
    if scan.rotation is not None:
        wanted = ["theta"] + (["phi"] if set(scan.rotation.planes_deg) != {0.0} else [])
    else:
        wanted = [d.axis for d in scan.raster.directions] if scan.raster else []
    problems += [f"scan {scan.name}: needs axis {a}; bench {bench.name} has not" for a in wanted if a not in present]
    theta = bench.axes.theta
    if scan.rotation is not None and theta is not None:
        r = scan.rotation
        angles = r.angles_deg or (-(r.span_deg or 0) / 2, (r.span_deg or 0) / 2)
        for value in (min(angles), max(angles)):
            if not theta.low_deg <= value <= theta.high_deg:
                problems.append(
                    f"scan {scan.name}: rotation reaches {value:g} deg; bench {bench.name} allows theta from "
                    f"{theta.low_deg:g} to {theta.high_deg:g} deg"
                )
    return problems
