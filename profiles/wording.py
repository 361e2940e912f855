"""Turns what pydantic reports into plain lines: key, what was given, what is allowed."""

from __future__ import annotations

import re
from collections.abc import Iterable, Iterator
from difflib import get_close_matches
from typing import Any, get_args

from pydantic import BaseModel, ValidationError

UNIT = re.compile(r"(?:_(?:deg|rad|mrad|mm|um|m|cm|mhz|khz|hz|ghz|us|ns|ms|s|s2|v|mv|uv|c|k|per|kpa|pa))+$")
BOUNDS = {
    "greater_than": ("gt", "more than"),
    "greater_than_equal": ("ge", "at least"),
    "less_than": ("lt", "less than"),
    "less_than_equal": ("le", "at most"),
    "too_short": ("min_length", "a list of at least this many:"),
    "too_long": ("max_length", "a list of at most this many:"),
}
TYPES = {
    "int_type": "a whole number",
    "float_type": "a number",
    "finite_number": "a finite number",
    "string_type": "text in quotes",
    "bool_type": "true or false",
    "tuple_type": "a list in [ ]",
    "dict_type": "a table",
    "model_type": "a table",
    "string_pattern_mismatch": "lower case letters, digits and hyphens, at most 64",
}
LONGEST_SHOWN = 60
WHOLE_FILE = "the file"


def problems_of(error: ValidationError, model: type[BaseModel]) -> list[str]:
    """One line a problem, each beginning with its key."""
    lines: list[str] = []
    for entry in error.errors(include_url=False):
        location = tuple(str(part) for part in entry["loc"])
        lines.extend(_lines(entry, location, model))
    return list(dict.fromkeys(lines))


def _lines(entry: Any, location: tuple[str, ...], model: type[BaseModel]) -> Iterator[str]:
    key = ".".join(location) or WHOLE_FILE
    kind, given, context = entry["type"], entry.get("input"), entry.get("ctx", {})
    if kind == "extra_forbidden":
        yield f"{key}: unknown key; {_instead(location, model)}"
    elif kind == "missing":
        yield f"{key}: missing"
    elif kind in BOUNDS:
        name, words = BOUNDS[kind]
        counted = kind == "too_short" and len(given) >= context[name]
        if not counted:  # a list that is long enough but has a wrong entry is told by that entry
            yield f"{key}: {_shown(given)} given; allowed: {words} {_plain(context[name])}"
    elif kind == "literal_error":
        yield f"{key.removesuffix('.[key]')}: {_shown(given)} given; allowed: {context['expected']}"
    elif kind == "value_error":
        prefix = f"{key}." if location else ""
        for part in re.split(r"; (?!allowed|give|use)", str(context["error"])):
            yield f"{prefix}{part}" if re.match(r"[a-z_.]+: ", part) else f"{key}: {part}"
    elif kind in TYPES:
        yield f"{key}: {_shown(given)} given; allowed: {TYPES[kind]}"
    else:
        yield f"{key}: {_shown(given)} given; {entry['msg'][0].lower()}{entry['msg'][1:]}"


def _shown(given: Any) -> str:
    """What was given, shortened where it is long."""
    text = repr(given)
    return text if len(text) <= LONGEST_SHOWN else text[: LONGEST_SHOWN - 4] + " ..."


def _plain(bound: float) -> str:
    """A bound without a needless decimal point."""
    return f"{bound:g}" if abs(bound) < 1e6 else str(bound)


def _instead(location: tuple[str, ...], model: type[BaseModel]) -> str:
    """What to write in place of an unknown key."""
    allowed = sorted(_keys_at(model, location[:-1]))
    wrong = location[-1]
    stem = UNIT.sub("", wrong)
    same_quantity = [k for k in allowed if UNIT.sub("", k) == stem]
    if same_quantity:
        return f"this quantity is given as {same_quantity[0]}"
    close = get_close_matches(wrong, allowed, n=1)
    if close:
        return f"did you mean {close[0]}? allowed: {', '.join(allowed)}"
    return f"allowed: {', '.join(allowed) or 'none'}"


def _keys_at(model: type[BaseModel], location: Iterable[str]) -> set[str]:
    """Keys of the table at `location`, or none where the models do not say."""
    at: type[BaseModel] | None = model
    for part in location:
        if at is None:
            return set()
        if part in at.model_fields:
            at = _table_in(at.model_fields[part].annotation)
    return set(at.model_fields) if at is not None else set()


def _table_in(annotation: Any) -> type[BaseModel] | None:
    """The model inside an annotation such as `tuple[M, ...]`, `dict[str, M]` or `M | None`."""
    if isinstance(annotation, type) and issubclass(annotation, BaseModel):
        return annotation
    for inner in get_args(annotation):
        found = _table_in(inner)
        if found is not None:
            return found
    return None
