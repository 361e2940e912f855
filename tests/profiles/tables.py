"""Shipped profiles as tables, and places in them, for tests that spoil one thing or several."""

from __future__ import annotations

from copy import deepcopy
from pathlib import Path
from typing import Any

from profiles.load import MODELS, Kind, every, read

Tables = dict[str, Any]
Place = tuple[str | int, ...]


def shipped(kind: Kind, name: str) -> Tables:
    """The tables of a shipped profile, without what belongs to the simulator."""
    path = next(p for k, n, p in every() if (k, n) == (kind, name))
    tables = read(path)
    tables.pop("simulation", None)
    return tables


def all_shipped() -> list[tuple[Kind, str, Path]]:
    """Kind, name and file of every profile; tests see no user's folder."""
    return list(every())


def models() -> list[Kind]:
    """All kinds."""
    return list(MODELS)


def places_of_tables(tables: Any, here: Place = ()) -> list[Place]:
    """Where the tables are, the top one included; not inside tables whose keys are free names."""
    found: list[Place] = []
    if isinstance(tables, dict):
        if here[-1:] != ("commands",) and here[-1:] != ("instruments",) and here[-1:] != ("axis_words",):
            found.append(here)
        for key, value in tables.items():
            found += places_of_tables(value, (*here, key))
    elif isinstance(tables, list):
        for index, value in enumerate(tables):
            found += places_of_tables(value, (*here, index))
    return found


def changed(tables: Tables, changes: dict[Place, Any]) -> Tables:
    """A copy with other values at some places; None takes a key away."""
    copy = deepcopy(tables)
    for place, value in changes.items():
        at: Any = copy
        for step in place[:-1]:
            at = at[step]
        if value is None:
            del at[place[-1]]
        else:
            at[place[-1]] = value
    return copy


def key(place: Place) -> str:
    """A place as problems name it."""
    return ".".join(map(str, place))
