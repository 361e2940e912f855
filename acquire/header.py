"""What a store says of itself: resolved profiles with checksums, circumstances, version, time of the start."""

from __future__ import annotations

import hashlib
import json
from collections.abc import Mapping
from dataclasses import asdict, dataclass, field, fields
from datetime import UTC, datetime
from importlib.metadata import PackageNotFoundError, version
from pathlib import Path
from typing import Any

import numpy as np

from checks.observation import Circumstances, Gate

STORE_FORMAT = "truepivot-scan"
STORE_VERSION = 1


def program_version() -> str:
    """Of the installed distribution."""
    try:
        return version("truepivot")
    except PackageNotFoundError:
        return "unknown"


def read_attributes(store: Path) -> dict[str, Any]:
    """Attributes of a store, read without anything that takes long to import.

    Raises:
        ValueError: there is no store of this program at that place; one line.
    """
    try:
        attributes = json.loads((store / "zarr.json").read_text("utf-8"))["attributes"]
    except (OSError, ValueError, KeyError) as error:
        raise ValueError(f"{store} is no store of a scan") from error
    if attributes.get("format") != STORE_FORMAT:
        raise ValueError(f"{store} is no store of a scan")
    if attributes["format_version"] > STORE_VERSION:
        raise ValueError(f"{store} was written by a newer version: install that to read it")
    found: dict[str, Any] = attributes
    return found


def checksum(profile: Mapping[str, Any]) -> str:
    """SHA-256 of a profile as JSON with sorted keys."""
    return hashlib.sha256(json.dumps(profile, sort_keys=True).encode()).hexdigest()


def utc_now() -> str:
    """The time as ISO 8601."""
    return datetime.now(UTC).isoformat(timespec="milliseconds")


def seconds_since(utc: str) -> float:
    """By the wall clock, which may have been set meanwhile; `utc` as `utc_now` writes it."""
    return (datetime.now(UTC) - datetime.fromisoformat(utc)).total_seconds()


@dataclass(frozen=True)
class StoreHeader:
    """Resolved profiles as JSON mappings, and when the scan began (ISO 8601, UTC)."""

    bench: dict[str, Any]
    sensor: dict[str, Any]
    source: dict[str, Any]
    scan: dict[str, Any]
    started_utc: str = field(default_factory=utc_now)

    def attributes(self, circumstances: Circumstances) -> dict[str, Any]:
        """Attributes of the store's group."""
        profiles = {key: getattr(self, key) for key in ("bench", "sensor", "source", "scan")}
        return {
            "format": STORE_FORMAT,
            "format_version": STORE_VERSION,
            "program_version": program_version(),
            "started_utc": self.started_utc,
            "sealed": False,
            "profiles": profiles,
            "profiles_sha256": {key: checksum(value) for key, value in profiles.items()},
            "circumstances": circumstances_as_mapping(circumstances),
            "finding_changes": [],
        }

    def continues(self, profiles: Mapping[str, Any]) -> bool:
        """Whether it is of the same scan as these profiles; range and start of the record are found when it runs."""
        return all(_same_scan(getattr(self, key), profiles[key]) for key in ("sensor", "source", "scan"))


def _same_scan(one: Mapping[str, Any], other: Mapping[str, Any]) -> bool:
    found_anew = ("full_scale_v", "start_us")

    def fixed(profile: Mapping[str, Any]) -> dict[str, Any]:
        plain: dict[str, Any] = json.loads(json.dumps(profile))
        if "capture" in plain:
            plain["capture"] = {k: v for k, v in plain["capture"].items() if k not in found_anew}
        return plain

    return fixed(one) == fixed(other)


def circumstances_as_mapping(circumstances: Circumstances) -> dict[str, Any]:
    """For JSON; floats survive exactly."""
    return {
        key: value.tolist() if isinstance(value, np.ndarray) else value for key, value in asdict(circumstances).items()
    }


def circumstances_from_mapping(mapping: Mapping[str, Any]) -> Circumstances:
    """What `circumstances_as_mapping` wrote."""
    known = {f.name for f in fields(Circumstances)}
    values = {key: value for key, value in mapping.items() if key in known}
    for key in ("frequencies_hz", "side_lines_hz"):
        values[key] = np.array(values[key], np.float64)
    values["gate"] = Gate(**values["gate"])
    return Circumstances(**values)
