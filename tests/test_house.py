"""The house: what stands at the top of the repository, and which way imports may point."""

from __future__ import annotations

import shutil
import subprocess
import sys
from pathlib import Path

import pytest

ROOT = Path(__file__).parents[1]
ROOMS = {"acquire", "checks", "drivers", "profiles", "sim_hardware"}
PAPERS = {"README.md", "DEVELOPERS.md", "CHANGELOG.md", "LICENSE", "pyproject.toml", ".gitignore"}
TOP = ROOMS | PAPERS | {"tests", ".ci"}
# a module in `room` that imports `above` breaks an arrow
UPWARDS = [
    ("checks", "profiles"),
    ("checks", "acquire.plan"),
    ("drivers", "acquire"),
    ("drivers", "checks.water"),
    ("profiles", "drivers.link"),
    ("sim_hardware", "checks.element"),
    ("sim_hardware", "drivers.scope"),
    ("acquire", "sim_hardware.tank"),
]


def lint(folder: Path, cache: Path) -> subprocess.CompletedProcess[str]:
    """Import-linter with the contracts of `folder/pyproject.toml`, over the rooms that stand there."""
    call = f"from importlinter.cli import lint_imports; raise SystemExit(lint_imports(cache_dir={str(cache)!r}))"
    return subprocess.run(
        [sys.executable, "-P", "-c", call], cwd=folder, capture_output=True, text=True, timeout=100, check=False
    )


def test_every_import_points_down(tmp_path: Path) -> None:
    done = lint(ROOT, tmp_path)
    assert done.returncode == 0, done.stdout


@pytest.mark.parametrize(("room", "above"), UPWARDS)
def test_an_import_that_points_up_is_found_even_inside_a_function(room: str, above: str, tmp_path: Path) -> None:
    house = tmp_path / "house"
    for name in ROOMS:
        shutil.copytree(ROOT / name, house / name, ignore=shutil.ignore_patterns("__pycache__", "*.toml"))
    shutil.copy(ROOT / "pyproject.toml", house)
    (house / room / "planted.py").write_text(f"def f() -> None:\n    import {above}\n", "utf-8")
    done = lint(house, tmp_path / "cache")
    assert done.returncode != 0
    assert f"{room}.planted -> {above}" in done.stdout


def test_only_the_agreed_entries_stand_at_the_top() -> None:
    if not (ROOT / ".git").exists() or shutil.which("git") is None:
        pytest.skip("not a git checkout")
    listed = subprocess.run(["git", "ls-files"], cwd=ROOT, capture_output=True, text=True, timeout=60, check=True)
    assert {line.split("/", 1)[0] for line in listed.stdout.splitlines()} == TOP


def test_every_folder_with_modules_is_a_package() -> None:
    folders = {path.parent for room in [*ROOMS, "tests"] for path in (ROOT / room).rglob("*.py")}
    assert [f for f in sorted(folders) if not (f / "__init__.py").is_file()] == []


def test_test_folders_mirror_the_rooms() -> None:
    own = {"published", "benchmarks", "end_to_end", "faults"}
    there = {p.name for p in (ROOT / "tests").iterdir() if p.is_dir() and (p / "__init__.py").is_file()}
    assert there - own <= ROOMS
