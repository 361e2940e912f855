"""`truepivot profiles`: what it prints and how it ends."""

from __future__ import annotations

import json
import os
import subprocess
import sys
import tomllib
from collections.abc import Mapping
from pathlib import Path
from types import MappingProxyType
from typing import Any

import pytest

from acquire.cli.profile_commands import lines_of
from profiles.load import MODELS, every, load_any, shipped_folder

NOTHING: Mapping[str, str] = MappingProxyType({})


def profiles(*words: str, own: Path | None = None) -> subprocess.CompletedProcess[str]:
    environment = dict(os.environ) | ({"TRUEPIVOT_PROFILES": str(own)} if own else {})
    call = [sys.executable, "-m", "acquire.cli", "profiles", *words]
    return subprocess.run(call, capture_output=True, text=True, timeout=60, check=False, env=environment)


def own_scan(folder: Path, name: str, replaced: Mapping[str, str] = NOTHING) -> Path:
    text = (shipped_folder() / "scans" / "line-x.toml").read_text("utf-8").replace('"line-x"', f'"{name}"')
    for old, new in replaced.items():
        text = text.replace(old, new)
    path = folder / "scans" / f"{name}.toml"
    path.parent.mkdir(parents=True, exist_ok=True)
    path.write_text(text, "utf-8")
    return path


def test_the_list_says_kind_name_title_and_where_from(tmp_path: Path) -> None:
    mine = own_scan(tmp_path, "mine")
    done = profiles("list", own=tmp_path)
    assert done.returncode == 0
    lines = done.stdout.splitlines()
    assert len(lines) == len(list(every())) + 1
    assert any(line.split() == ["scan", "mine", "Line", "across", "the", "focus", f"({mine})"] for line in lines)
    assert any(line.startswith("bench       demo-tank ") and line.endswith("(shipped)") for line in lines)


def test_one_unusable_file_does_not_hide_the_others(tmp_path: Path) -> None:
    own_scan(tmp_path, "mine").write_text("x = = 1", "utf-8")
    done = profiles("list", own=tmp_path)
    assert done.returncode == 0
    assert "UNUSABLE" in next(line for line in done.stdout.splitlines() if " mine " in line)
    assert " demo-tank " in done.stdout


def test_a_profile_is_shown_resolved_as_toml_and_without_the_truth() -> None:
    done = profiles("show", "demo-tank")
    assert done.returncode == 0
    tables = tomllib.loads(done.stdout)
    assert tables["instruments"]["stage"]["baud_rate"] == 115_200  # a default
    assert tables["axes"]["theta"]["high_deg"] == 95
    assert "simulation" not in tables
    assert done.stdout.splitlines()[0] == f"# {shipped_folder() / 'benches' / 'demo-tank.toml'}"


@pytest.mark.parametrize("path", [path for _, _, path in every()], ids=lambda path: path.stem)
def test_what_is_shown_of_a_profile_reads_back_as_the_same(path: Path) -> None:
    resolved: dict[str, Any] = load_any(path).model_dump(mode="json", exclude_none=True)
    lines = lines_of(resolved)
    assert tomllib.loads("\n".join(lines)) == resolved
    assert all(len(line.splitlines()) == 1 for line in lines)


def test_a_name_that_is_not_there_is_the_users_mistake() -> None:
    done = profiles("show", "nothing")
    assert (done.returncode, done.stdout) == (2, "")
    assert done.stderr == "truepivot: no profile is called 'nothing'; see: truepivot profiles list\n"


def test_valid_files_are_named_and_end_well() -> None:
    files = sorted(map(str, shipped_folder().glob("*/*.toml")))
    done = profiles("validate", *files)
    assert done.returncode == 0, done.stderr
    assert [line.split(": a valid ")[0] for line in done.stdout.splitlines()] == files


def test_the_problems_of_all_files_are_told_at_once(tmp_path: Path) -> None:
    one = own_scan(tmp_path, "one", {"z_mm = 39": "z_mm = -39", "averages = 16": "averages = 0"})
    two = own_scan(tmp_path, "two", {"span_mm": "span_m"})
    three = own_scan(tmp_path, "three", {"needle-0p1": "needle-7"})
    done = profiles("validate", str(one), str(two), str(three), str(tmp_path / "none.toml"))
    assert done.returncode == 2
    lines = done.stderr.removeprefix("truepivot: ").splitlines()
    assert lines[:2] == [
        f"{one}: position.z_mm: -39 given; allowed: more than 0",
        f"{one}: capture.averages: 0 given; allowed: at least 1",
    ]
    assert f"{two}: raster.directions.0.span_m: unknown key; this quantity is given as span_mm" in lines
    assert any(line.startswith(f"{three}: scan three: sensor: no sensor is called 'needle-7'") for line in lines)
    assert lines[-1] == f"{tmp_path / 'none.toml'}: cannot be read: No such file or directory"
    assert "Traceback" not in done.stderr


def test_a_scan_is_tried_on_a_bench_when_asked(tmp_path: Path) -> None:
    scan = own_scan(tmp_path, "fine", {"sample_rate_mhz = 250": "sample_rate_mhz = 240"})
    assert profiles("validate", str(scan)).returncode == 0
    done = profiles("validate", str(scan), "--bench", "focus-tank")
    assert done.returncode == 2
    assert f"{scan}: scan fine: capture.sample_rate_mhz: 240 given; scope-preamble-16 allows 25, " in done.stderr


@pytest.mark.parametrize("kind", MODELS)
def test_the_schema_of_every_kind_allows_no_other_key_and_needs_what_the_model_needs(kind: str) -> None:
    done = profiles("schema", kind)
    schema = json.loads(done.stdout)
    model = next(m for k, m in MODELS.items() if k == kind)
    assert schema["additionalProperties"] is False
    assert set(schema["required"]) == {key for key, field in model.model_fields.items() if field.is_required()}
    assert schema["properties"]["kind"]["const"] == kind
    assert all(inner["additionalProperties"] is False for inner in schema.get("$defs", {}).values())


def test_a_kind_that_does_not_exist_is_told_with_those_that_do() -> None:
    done = profiles("schema", "tank")
    assert (done.returncode, done.stdout) == (2, "")
    assert done.stderr == "truepivot: 'tank' given; allowed: instrument, bench, sensor, source, scan\n"
