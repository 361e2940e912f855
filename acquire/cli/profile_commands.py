"""Commands about profiles: list, show, validate, schema."""

from __future__ import annotations

import json
import sys
from pathlib import Path
from typing import Annotated

import typer

app = typer.Typer(help="List, show and check profiles.", no_args_is_help=True, rich_markup_mode=None)


class UserMistake(Exception):
    """The user's; one line."""


@app.command("list")
def list_profiles() -> None:
    """All profiles: kind, name, title, and whether they are shipped or your own."""
    from profiles.errors import ProfileError
    from profiles.load import every, read, shipped_folder

    for kind, name, path in every():
        try:
            title = read(path).get("title", "")
        except ProfileError as error:
            title = f"UNUSABLE: {error}"
        origin = "shipped" if path.is_relative_to(shipped_folder()) else str(path)
        sys.stdout.write(f"{kind:<11} {name:<24} {title}  ({origin})\n")


@app.command()
def show(name: Annotated[str, typer.Argument(help="name of a profile, or its file")]) -> None:
    """Print a profile as it is read, defaults included. The truth of a simulated bench is not shown."""
    from profiles.load import every, load_any

    path = Path(name)
    found = [path] if path.is_file() else [p for _, n, p in every() if n == name]
    if not found:
        raise UserMistake(f"no profile is called {name!r}; see: truepivot profiles list")
    for at in found:
        sys.stdout.write(f"# {at}\n")
        for line in lines_of(load_any(at).model_dump(mode="json", exclude_none=True)):
            sys.stdout.write(line + "\n")


def lines_of(table: dict[str, object], prefix: str = "") -> list[str]:
    """A line of TOML for each value, with its whole key."""
    found = []
    for key, value in table.items():
        if isinstance(value, dict) and value:
            found += lines_of(value, f"{prefix}{key}.")
        else:
            found.append(f"{prefix}{key} = {_toml(value)}")
    return found


def _toml(value: object) -> str:
    """A value as TOML, on one line."""
    if value == {}:
        return "{}"
    if isinstance(value, dict):
        return "{ " + ", ".join(f"{key} = {_toml(inner)}" for key, inner in value.items()) + " }"
    if isinstance(value, list):
        return "[" + ", ".join(_toml(inner) for inner in value) + "]"
    return json.dumps(value, ensure_ascii=False)  # numbers, text and truth are written alike in both


@app.command()
def validate(
    files: Annotated[list[Path], typer.Argument(help="profile files")],
    bench: Annotated[str | None, typer.Option(help="whether scans can be done on this bench, too")] = None,
) -> None:
    """Check profiles and what they refer to; every problem is told at once."""
    from profiles.errors import ProfileError
    from profiles.load import load_any
    from profiles.references import unmet, unmet_on

    problems: list[str] = []
    for file in files:
        try:
            profile = load_any(file)
            wrong = unmet(profile) or (unmet_on(profile, bench) if bench else [])
        except ProfileError as error:
            problems += error.problems
            continue
        problems += [f"{file}: {line}" for line in wrong]
        if not wrong:
            sys.stdout.write(f"{file}: a valid {type(profile).__name__.lower()} profile\n")
    if problems:
        raise ProfileError(problems)


@app.command()
def schema(kind: Annotated[str, typer.Argument(help="instrument, bench, sensor, source or scan")]) -> None:
    """Print the JSON Schema of a kind of profile, for editors."""
    from profiles.load import MODELS

    if kind not in MODELS:
        raise UserMistake(f"{kind!r} given; allowed: {', '.join(MODELS)}")
    model = next(m for k, m in MODELS.items() if k == kind)
    sys.stdout.write(json.dumps(model.model_json_schema(), indent=2) + "\n")
