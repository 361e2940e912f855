"""Whether a scan, its sensor, its source and a bench fit together; all that does not, at once."""

from __future__ import annotations

from profiles.bench import Bench, RotaryAxis
from profiles.instrument import Instrument
from profiles.scan import Rotation, Scan
from profiles.sensor import Sensor
from profiles.source import Source


def misfits(scan: Scan, bench: Bench, sensor: Sensor, source: Source, scope: Instrument | None = None) -> list[str]:
    """One line for each contradiction between the profiles; empty when they fit.

    Without `scope` it is not asked whether the oscilloscope can do what the scan wants.
    """
    problems = _axes(scan, bench) + beyond_the_sound(scan, sensor, source)
    return problems + (beyond_the_scope(scan, scope) if scope is not None else [])


def beyond_the_sound(scan: Scan, sensor: Sensor, source: Source) -> list[str]:
    """What the scan wants and sensor or source do not offer, and a record too short for the burst."""
    problems = []
    wanted = scan.highest_mhz
    if wanted is not None and wanted > sensor.highest_mhz:
        problems.append(
            f"scan {scan.name}: highest_mhz: {wanted:g} given; sensor {sensor.name} reaches {sensor.highest_mhz:g}"
        )
    top = source.frequency_mhz * source.highest_harmonic
    if wanted is not None and wanted > top:
        problems.append(f"scan {scan.name}: highest_mhz: {wanted:g} given; source {source.name} offers up to {top:g}")
    lead_us = scan.capture.lead_us if scan.capture.start_us is None else 0.0
    needed_us = source.cycles / source.frequency_mhz + lead_us
    record_us = scan.capture.points / scan.capture.sample_rate_mhz
    if record_us < needed_us:
        problems.append(
            f"scan {scan.name}: capture: the record lasts {record_us:.3g} us; lead and burst need "
            f"{needed_us:.3g} us: more points or a lower sample_rate_mhz"
        )
    return problems


def beyond_the_scope(scan: Scan, scope: Instrument) -> list[str]:
    """Capture settings that the oscilloscope has not."""
    if scope.scope is None:
        return []
    limits, capture = scope.scope, scan.capture
    head = f"scan {scan.name}: capture"
    problems = []
    if capture.sample_rate_mhz not in limits.sample_rates_mhz:
        rates = ", ".join(f"{rate:g}" for rate in sorted(limits.sample_rates_mhz))
        problems.append(f"{head}.sample_rate_mhz: {capture.sample_rate_mhz:g} given; {scope.name} allows {rates}")
    problems += [
        f"{head}.{key}: {given:g} given; {scope.name} allows at most {most:g}"
        for key, given, most in (
            ("points", capture.points, limits.max_points),
            ("averages", capture.averages, limits.max_averages),
            ("full_scale_v", capture.full_scale_v or 0.0, max(limits.full_scales_v)),
        )
        if given > most
    ]
    return problems


def _axes(scan: Scan, bench: Bench) -> list[str]:
    present = bench.axes.present()
    if scan.rotation is not None:
        wanted = ["theta"] + (["phi"] if set(scan.rotation.planes_deg) != {0.0} else [])
    else:
        wanted = [d.axis for d in scan.raster.directions] if scan.raster else []
    problems = [f"scan {scan.name}: needs axis {a}; bench {bench.name} has not" for a in wanted if a not in present]
    if scan.rotation is not None:
        head = f"scan {scan.name}: rotation"
        problems += _beyond(f"{head} reaches", "theta", _extremes(scan.rotation), bench.axes.theta, bench.name)
        planes = (min(scan.rotation.planes_deg), max(scan.rotation.planes_deg))
        problems += _beyond(f"{head}.planes_deg:", "phi", planes, bench.axes.phi, bench.name)
    return problems


def _extremes(rotation: Rotation) -> tuple[float, float]:
    half = (rotation.span_deg or 0.0) / 2
    angles = rotation.angles_deg or (-half, half)
    return min(angles), max(angles)


def _beyond(what: str, axis: str, angles: tuple[float, float], travel: RotaryAxis | None, bench: str) -> list[str]:
    if travel is None:
        return []
    return [
        f"{what} {angle:g} deg; bench {bench} allows {axis} from {travel.low_deg:g} to {travel.high_deg:g} deg"
        for angle in dict.fromkeys(angles)
        if not travel.low_deg <= angle <= travel.high_deg
    ]
