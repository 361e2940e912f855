"""A simulated bench as a process of a test, and its instruments opened as a scan opens them."""

from __future__ import annotations

import tomllib
from collections.abc import Iterator, Mapping
from contextlib import contextmanager
from pathlib import Path
from typing import Any

import tomli_w

from acquire.processes import simulated_bench
from drivers.bench import BenchInstruments, open_instruments
from profiles.bench import Bench
from profiles.instrument import Role
from profiles.load import find, load_bench, load_instrument


def bench_file(
    folder: Path,
    shipped: str,
    profiles: Mapping[Role, str],
    over_tcp: bool = False,
    truth: Mapping[str, Mapping[str, Any]] | None = None,
) -> Path:
    """A shipped bench with other profiles for some roles, and some of the simulation's tables changed.

    `over_tcp` leaves no instrument on a serial line.
    """
    tables = tomllib.loads(find("bench", shipped).read_text("utf-8"))
    for name, changes in (truth or {}).items():
        tables["simulation"][name] |= changes
    for port, (role, attached) in enumerate(tables["instruments"].items(), 1):
        attached["profile"] = profiles.get(role, attached["profile"])
        if over_tcp:
            attached["address"] = f"tcp://127.0.0.1:{port}"  # free ports are taken instead
    path = folder / "written.toml"
    path.write_text(tomli_w.dumps(tables), "utf-8")
    return path


@contextmanager
def simulated(
    folder: Path,
    shipped: str,
    profiles: Mapping[Role, str],
    over_tcp: bool = False,
    truth: Mapping[str, Mapping[str, Any]] | None = None,
) -> Iterator[Bench]:
    """The simulator on free addresses for as long as the block; gives the bench that leads to it."""
    path = bench_file(folder, shipped, profiles, over_tcp, truth)
    with simulated_bench(path, folder, "--speed", "max") as reached:
        yield load_bench(reached)


@contextmanager
def opened(bench: Bench) -> Iterator[BenchInstruments]:
    """Its instruments, open."""
    profiles = {role: load_instrument(a.profile) for role, a in bench.instruments.items()}
    with open_instruments(bench, profiles) as instruments:
        yield instruments
