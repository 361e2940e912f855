"""Find, read and validate profiles. A user's own folder is searched before the shipped profiles."""

from __future__ import annotations

import json
import os
import tomllib
from collections.abc import Iterator, Mapping
from copy import deepcopy
from difflib import get_close_matches
from importlib.resources import files
from pathlib import Path
from typing import Any, Literal, TypeVar

from platformdirs import user_config_path
from pydantic import ValidationError

from profiles.bench import Bench
from profiles.errors import ProfileError, ProfileNotFound
from profiles.instrument import Instrument
from profiles.model import Profile
from profiles.scan import Scan
from profiles.sensor import Sensor
from profiles.source import Source
from profiles.wording import problems_of

Kind = Literal["instrument", "bench", "sensor", "source", "scan"]
MODELS: dict[Kind, type[Profile]] = {
    "instrument": Instrument,
    "bench": Bench,
    "sensor": Sensor,
    "source": Source,
    "scan": Scan,
}
FOLDERS: dict[Kind, str] = {
    "instrument": "instruments",
    "bench": "benches",
    "sensor": "sensors",
    "source": "sources",
    "scan": "scans",
}
FOLDER_VARIABLE = "TRUEPIVOT_PROFILES"

P = TypeVar("P", bound=Profile)


def user_folder() -> Path:
    """The user's own profiles: `$TRUEPIVOT_PROFILES`, or the customary place for settings."""
    given = os.environ.get(FOLDER_VARIABLE)
    return Path(given) if given else user_config_path("truepivot") / "profiles"


def shipped_folder() -> Path:
    """The profiles that come with truepivot."""
    return Path(str(files("profiles")))


def available(kind: Kind) -> dict[str, Path]:
    """Name to file of every profile of a kind; the user's own hide shipped ones of the same name."""
    found: dict[str, Path] = {}
    for folder in (shipped_folder(), user_folder()):
        found |= {path.stem: path for path in sorted((folder / FOLDERS[kind]).glob("*.toml"))}
    return found


def find(kind: Kind, name_or_path: str | Path) -> Path:
    """The file of a profile.

    Raises:
        ProfileNotFound: no such file or name.
    """
    given = Path(name_or_path)
    if given.suffix == ".toml" or given.is_file():
        if given.is_file():
            return given
        raise ProfileNotFound([f"{given}: no such file"])
    known = available(kind)
    if str(name_or_path) in known:
        return known[str(name_or_path)]
    close = get_close_matches(str(name_or_path), known, n=1)
    meant = f"did you mean {close[0]}? " if close else ""
    raise ProfileNotFound([f"no {kind} is called {str(name_or_path)!r}; {meant}known: {', '.join(known) or 'none'}"])


def read(path: Path) -> dict[str, Any]:
    """The tables of a TOML file.

    Raises:
        ProfileError: it cannot be read, or is not TOML; the line is named.
    """
    try:
        return tomllib.loads(path.read_text("utf-8"))
    except OSError as error:
        raise ProfileError([f"{path}: cannot be read: {error.strerror}"]) from error
    except UnicodeDecodeError as error:
        raise ProfileError([f"{path}: is not UTF-8 text (byte {error.start})"]) from error
    except tomllib.TOMLDecodeError as error:
        raise ProfileError([f"{path}: is not TOML: {error}"]) from error


def validate(tables: Mapping[str, Any], kind: Kind, where: str = "") -> Profile:
    """The model of a profile. The `[simulation]` table of a bench is dropped before anything looks at it.

    Types are taken at their word: text is no number, and `true` is no 1.

    Raises:
        ProfileError: with every problem, a line each.
    """
    model = MODELS[kind]
    kept = {key: value for key, value in tables.items() if not (kind == "bench" and key == "simulation")}
    try:
        return _strict(model, kept)
    except ValidationError as error:
        prefix = f"{where}: " if where else ""
        lines = problems_of(error, model) + _contradictions(error, model, kept)
        raise ProfileError([prefix + line for line in dict.fromkeys(lines)]) from error


def _strict(model: type[Profile], tables: Mapping[str, Any]) -> Profile:
    """By way of JSON, which like TOML has lists and no tuples; so strictness still lets a list be a tuple."""
    return model.model_validate_json(json.dumps(tables, default=str), strict=True)


def _contradictions(error: ValidationError, model: type[Profile], tables: Mapping[str, Any]) -> list[str]:
    """What pydantic does not look at while there are unknown keys: whether the known ones agree."""
    unknown = [entry["loc"] for entry in error.errors(include_url=False) if entry["type"] == "extra_forbidden"]
    if not unknown:
        return []
    known = deepcopy(dict(tables))
    for *path, last in unknown:
        table: Any = known
        for part in path:
            table = table[part]
        del table[last]
    try:
        _strict(model, known)
    except ValidationError as second:
        return problems_of(second, model)
    return []


def load_any(path: Path) -> Profile:
    """The profile in a file, whatever its kind.

    Raises:
        ProfileError: with every problem, a line each.
    """
    tables = read(path)
    kind = tables.get("kind")
    if not isinstance(kind, str) or kind not in MODELS:
        raise ProfileError([f"{path}: kind: {kind!r} given; allowed: {', '.join(MODELS)}"])
    return validate(tables, kind, str(path))


def _load(kind: Kind, model: type[P], name_or_path: str | Path) -> P:
    path = find(kind, name_or_path)
    profile = validate(read(path), kind, str(path))
    if not isinstance(profile, model):
        raise ProfileError([f"{path}: is no {kind}"])
    if str(name_or_path) == path.stem != profile.name:
        raise ProfileError([f"{path}: name: {profile.name!r} given; allowed: {path.stem!r}, as the file is called"])
    return profile


def load_instrument(name_or_path: str | Path) -> Instrument:
    """An instrument profile; `ProfileError` names every problem."""
    return _load("instrument", Instrument, name_or_path)


def load_bench(name_or_path: str | Path) -> Bench:
    """A bench profile without its `[simulation]` table; `ProfileError` names every problem."""
    return _load("bench", Bench, name_or_path)


def load_sensor(name_or_path: str | Path) -> Sensor:
    """A sensor profile; `ProfileError` names every problem."""
    return _load("sensor", Sensor, name_or_path)


def load_source(name_or_path: str | Path) -> Source:
    """A source profile; `ProfileError` names every problem."""
    return _load("source", Source, name_or_path)


def load_scan(name_or_path: str | Path) -> Scan:
    """A scan profile; `ProfileError` names every problem."""
    return _load("scan", Scan, name_or_path)


def every() -> Iterator[tuple[Kind, str, Path]]:
    """Kind, name and file of all profiles that can be found."""
    for kind in MODELS:
        for name, path in available(kind).items():
            yield kind, name, path
