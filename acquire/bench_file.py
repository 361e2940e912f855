"""A resolved bench back to a file, for a process that reads one."""

from __future__ import annotations

from pathlib import Path

import tomli_w

from profiles.bench import Bench


def write_bench(bench: Bench, path: Path) -> None:
    """Write a bench profile as TOML."""
    path.write_text(tomli_w.dumps(bench.model_dump(mode="json", exclude_none=True)), "utf-8")
