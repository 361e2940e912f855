"""Bench and instrument profiles for process tests: written here, so that the tests need no shipped ones."""

from __future__ import annotations

import json
import os
import subprocess
import sys
import tomllib
from collections.abc import Iterator, Sequence
from contextlib import contextmanager
from dataclasses import dataclass, field
from pathlib import Path
from typing import IO, Any

from profiles.bench import Bench
from profiles.instrument import ACTIONS, Family, Role

ROLE: dict[str, tuple[Role, Family]] = {
    "test-scope-p": ("oscilloscope", "preamble"),
    "test-scope-c": ("oscilloscope", "curve"),
    "test-generator": ("generator", "burst"),
    "test-stage-iso": ("stage", "iso-words"),
    "test-stage-prefix": ("stage", "axis-prefix"),
    "test-thermometer": ("thermometer", "query"),
}

SIMULATION = """
[simulation]
seed = 7
[simulation.source]
radius_mm = 6.0
harmonics = 2
[simulation.element]
radius_mm = 0.2
[simulation.tank]
temperature_c = 21.25
"""


def write_instruments(folder: Path) -> None:
    """A user's folder of profiles with one instrument of each family."""
    (folder / "instruments").mkdir(parents=True)
    for name, (role, family) in ROLE.items():
        lines = ["format_version = 1", 'kind = "instrument"', f'name = "{name}"', f'role = "{role}"']
        lines += [f'family = "{family}"', 'identity = "^QUIET BASIN"']
        if role == "stage":
            lines += ['axis_words = {x = "X"}', "has_error_queue = false"]
        lines += ["[commands]", *(f'{action} = "X"' for action in ACTIONS[role][family])]
        if role == "oscilloscope":
            lines += ["[scope]", "full_scales_v = [0.08, 0.8, 8.0]", "sample_rates_mhz = [50.0, 100.0, 250.0]"]
            lines += ["max_points = 200000", "max_averages = 4096"]
            lines += ["[transfer]", "bits = 16", 'byte_order = "msb_first"']
        (folder / "instruments" / f"{name}.toml").write_text("\n".join(lines) + "\n")


def bench_toml(
    scope: str = "test-scope-p",
    stage: str = "test-stage-iso",
    stage_address: str = "tcp://127.0.0.3:0",
    simulation: str = SIMULATION,
) -> str:
    return f"""
format_version = 1
kind = "bench"
name = "test-bench"
[instruments.oscilloscope]
profile = "{scope}"
address = "tcp://127.0.0.1:0"
[instruments.generator]
profile = "test-generator"
address = "tcp://127.0.0.2:0"
[instruments.stage]
profile = "{stage}"
address = "{stage_address}"
[instruments.thermometer]
profile = "test-thermometer"
address = "tcp://127.0.0.4:0"
[axes.x]
low_mm = -50.0
high_mm = 50.0
speed_mm_per_s = 20.0
[axes.z]
low_mm = 20.0
high_mm = 300.0
speed_mm_per_s = 20.0
[axes.theta]
low_deg = -90.0
high_deg = 90.0
speed_deg_per_s = 30.0
[geometry]
reflector_distance_mm = 200.0
[[keep_out]]
name = "source"
low_mm = [-20.0, -20.0, -5.0]
high_mm = [20.0, 20.0, 5.0]
{simulation}"""


def a_bench() -> Bench:
    """With shipped instruments."""
    text = bench_toml("scope-preamble-16", "stage-iso", simulation="")
    text = text.replace("test-generator", "generator-burst").replace("test-thermometer", "thermometer-scpi")
    return Bench.model_validate(tomllib.loads(text))


@dataclass
class Simulator:
    """A running simulator process."""

    process: subprocess.Popen[str]
    addresses: dict[str, str]
    stdin: IO[str] | None = field(default=None)

    def port(self, role: str) -> int:
        return int(self.addresses[role].rsplit(":", 1)[1])

    def end(self) -> int:
        self.process.terminate()
        return self.process.wait(30)


def command(folder: Path, bench: Path, *options: str) -> tuple[list[str], dict[str, str]]:
    environment = {**os.environ, "TRUEPIVOT_PROFILES": str(folder)}
    return [sys.executable, "-m", "sim_hardware", str(bench), *options], environment


def folder_with(tmp_path: Path, text: str) -> tuple[Path, Path]:
    """Profiles folder and bench file."""
    folder = tmp_path / "profiles"
    if not folder.exists():
        write_instruments(folder)
    bench = tmp_path / "bench.toml"
    bench.write_text(text)
    return folder, bench


@contextmanager
def running(tmp_path: Path, text: str, options: Sequence[str] = ("--speed", "max")) -> Iterator[Simulator]:
    """A simulator with free ports; ended at the end."""
    folder, bench = folder_with(tmp_path, text)
    words, environment = command(folder, bench, "--free-ports", *options)
    with subprocess.Popen(words, env=environment, stdin=subprocess.PIPE, stdout=subprocess.PIPE, text=True) as process:
        try:
            assert process.stdout is not None
            ready: dict[str, Any] = json.loads(process.stdout.readline())
            assert ready["ready"] is True
            yield Simulator(process, ready["addresses"], process.stdin)
        finally:
            if process.poll() is None:
                process.kill()
