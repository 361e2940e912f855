"""What profiles refer to by name: whether it is there, and of the right sort."""

from __future__ import annotations

from profiles.bench import Bench
from profiles.errors import ProfileError
from profiles.fitting import beyond_the_sound, misfits
from profiles.instrument import Instrument, Role
from profiles.load import load_bench, load_instrument, load_sensor, load_source
from profiles.model import Profile
from profiles.scan import Scan
from profiles.sensor import Sensor
from profiles.source import Source


def instruments_of(bench: Bench) -> dict[Role, Instrument]:
    """The instrument profile of every role.

    Raises:
        ProfileError: every one that is missing, wrong, or of another role, a line each.
    """
    found: dict[Role, Instrument] = {}
    problems: list[str] = []
    for role, attached in bench.instruments.items():
        key = f"bench {bench.name}: instruments.{role}"
        try:
            instrument = load_instrument(attached.profile)
        except ProfileError as error:
            problems += [f"{key}: {line}" for line in error.problems]
            continue
        if instrument.role != role:
            problems.append(f"{key}: {instrument.name} is a profile for the role {instrument.role}; allowed: {role}")
        found[role] = instrument
    stage = found.get("stage")
    if stage is not None and stage.role == "stage" and stage.axis_words is not None:
        problems += [
            f"bench {bench.name}: axes.{axis}: {stage.name} has no such axis; allowed: {', '.join(stage.axis_words)}"
            for axis in bench.axes.present()
            if axis not in stage.axis_words
        ]
    if problems:
        raise ProfileError(problems)
    return found


def unmet(profile: Profile) -> list[str]:
    """What is wrong with the profiles that a bench or a scan refers to, a line each."""
    if isinstance(profile, Bench):
        try:
            instruments_of(profile)
        except ProfileError as error:
            return list(error.problems)
    return _unmet_by_scan(profile) if isinstance(profile, Scan) else []


def _unmet_by_scan(scan: Scan) -> list[str]:
    problems: list[str] = []
    sensor: Sensor | None = None
    source: Source | None = None
    try:
        sensor = load_sensor(scan.sensor)
    except ProfileError as error:
        problems += [f"scan {scan.name}: sensor: {line}" for line in error.problems]
    try:
        source = load_source(scan.source)
    except ProfileError as error:
        problems += [f"scan {scan.name}: source: {line}" for line in error.problems]
    if sensor is not None and source is not None:
        problems += beyond_the_sound(scan, sensor, source)
    return problems


def unmet_on(profile: Profile, bench_name: str) -> list[str]:
    """Why a scan cannot be done on a bench; nothing for other kinds of profile.

    Raises:
        ProfileError: the bench, or a profile that it or the scan refers to, is wrong.
    """
    if not isinstance(profile, Scan):
        return []
    bench = load_bench(bench_name)
    scope = instruments_of(bench)["oscilloscope"]
    return misfits(profile, bench, load_sensor(profile.sensor), load_source(profile.source), scope)
