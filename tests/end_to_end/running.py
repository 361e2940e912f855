"""A simulated bench, a daemon and the command line, as processes of a test."""

from __future__ import annotations

import socket
import subprocess
import sys
import time
from collections.abc import Iterator
from contextlib import contextmanager
from dataclasses import dataclass
from pathlib import Path
from typing import Any

from acquire.client import Client
from acquire.messages import RunScan, Status
from acquire.processes import daemon, simulated_bench
from profiles.load import find, load_bench, load_scan, load_sensor, load_source

ENDED = ("sealed", "broken-off", "failed")
LONG_S = 90.0


@dataclass(frozen=True)
class Running:
    """A bench that answers, and where its daemon does."""

    bench: Path
    endpoint: str
    folder: Path


@contextmanager
def running(folder: Path, bench: str = "demo-tank", speed: str = "max", seed: int | None = None) -> Iterator[Running]:
    """Simulator and daemon for as long as the block."""
    folder.mkdir(exist_ok=True)
    endpoint = f"ipc://{folder / 'd'}"
    options = ["--speed", speed] + (["--seed", str(seed)] if seed is not None else [])
    path = Path(bench) if bench.endswith(".toml") else find("bench", bench)
    with simulated_bench(path, folder, *options) as reached, daemon(reached, endpoint):
        yield Running(reached, endpoint, folder)


def request(scan: str, store: Path, **changes: Any) -> RunScan:
    """A request for a shipped scan with some tables changed."""
    tables = load_scan(scan).model_dump(mode="json") | changes
    return RunScan(
        scan=tables,
        sensor=load_sensor(tables["sensor"]).model_dump(mode="json"),
        source=load_source(tables["source"]).model_dump(mode="json"),
        store=str(store),
    )


SMALL = {"rotation": {"span_deg": 60.0, "step_deg": 4.0}, "revisit_every": 6}
SHORT_CAPTURE = {"averages": 4, "sample_rate_mhz": 125.0, "points": 2500, "lead_us": 4.0}


def wait_for_end(client: Client) -> Status:
    """Until the scan is over."""
    deadline = time.monotonic() + LONG_S
    while time.monotonic() < deadline:
        status = client.status()
        if status.state in ENDED:
            return status
        time.sleep(0.05)
    raise AssertionError(f"still {status.state} after {LONG_S} s")


def wait_for_points(client: Client, count: int) -> None:
    """Until so many points are done."""
    deadline = time.monotonic() + LONG_S
    while client.status().done < count:
        if time.monotonic() > deadline:
            raise AssertionError(f"not {count} points after {LONG_S} s")
        time.sleep(0.01)


def scanned(on: Running, wanted: RunScan) -> Status:
    """Run a scan to its end."""
    with Client(on.endpoint) as client:
        client.ask(wanted)
        return wait_for_end(client)


def command(*words: str, **options: Any) -> subprocess.CompletedProcess[str]:
    """Run `truepivot` with these words."""
    return subprocess.run(
        [sys.executable, "-m", "acquire.cli", *words], capture_output=True, text=True, timeout=LONG_S, **options
    )


def source_is_on(bench: Path) -> bool:
    """What the simulated generator says of its output, over a connection of its own."""
    host, port = load_bench(bench).instruments["generator"].address.removeprefix("tcp://").split(":")
    with socket.create_connection((host, int(port)), 5) as connection:
        connection.sendall(b"OUTPut:STATe?\n")
        return connection.recv(16).strip() == b"1"
