"""A bench as TOML text, with the addresses that were really taken and without the truth."""

from __future__ import annotations

import json
from collections.abc import Mapping
from typing import Any

from profiles.bench import Bench
from profiles.instrument import Role


def bench_text(bench: Bench, addresses: Mapping[Role, str]) -> str:
    """The bench with these addresses. The model leaves the `[simulation]` table out when it is written."""
    document = bench.model_dump(mode="json", exclude_none=True)
    for role, address in addresses.items():
        document["instruments"][role]["address"] = address
    return "\n".join(_table(document, ())) + "\n"


def _table(table: Mapping[str, Any], keys: tuple[str, ...]) -> list[str]:
    lines = [f"[{'.'.join(keys)}]"] if keys else []
    lines += [f"{key} = {_value(value)}" for key, value in table.items() if not isinstance(value, dict)]
    for key, value in table.items():
        if isinstance(value, dict):
            lines += ["", *_table(value, (*keys, key))]
    return lines


def _value(value: Any) -> str:
    if isinstance(value, dict):
        return "{" + ", ".join(f"{k} = {_value(v)}" for k, v in value.items()) + "}"
    if isinstance(value, list):
        return "[" + ", ".join(_value(v) for v in value) + "]"
    return json.dumps(value)  # of strings, numbers and truth values, JSON is TOML
