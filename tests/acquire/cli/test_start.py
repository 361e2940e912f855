"""The command line starts quickly: what takes long to import is imported by the commands that need it."""

from __future__ import annotations

import subprocess
import sys

import pytest

SLOW = {"scipy", "matplotlib", "zarr", "pyvisa", "pyvisa_py", "numpy", "xarray", "zmq", "pydantic", "serial"}
COMMANDS = [
    "serve", "run", "watch", "hold", "resume", "stop", "status", "shutdown", "simulate",
    "results", "report", "check", "replay", "demo", "profiles",
]  # fmt: skip
PROGRAM = """
import sys
sys.argv = ["truepivot", *sys.argv[1:]]
from acquire.cli import main
try:
    main()
finally:
    print("LOADED", *sorted({name.split(".")[0] for name in sys.modules}))
"""


def loaded_by(*words: str) -> tuple[str, set[str]]:
    """What a command says, and the packages that it has imported by its end."""
    done = subprocess.run(
        [sys.executable, "-c", PROGRAM, *words], capture_output=True, text=True, timeout=60, check=False
    )
    assert done.returncode == 0, done.stderr
    said, _, names = done.stdout.rpartition("LOADED ")
    return said, set(names.split())


def test_help_names_every_command_and_imports_nothing_slow() -> None:
    said, loaded = loaded_by("--help")
    assert [c for c in COMMANDS if c not in said] == []
    assert loaded & SLOW == set()
    assert "typer" in loaded


@pytest.mark.parametrize("command", ["run", "results", "demo", "serve"])
def test_help_of_a_command_imports_nothing_slow(command: str) -> None:
    assert loaded_by(command, "--help")[1] & (SLOW - {"pydantic"}) == set()


def test_profiles_are_listed_without_what_instruments_and_pictures_need() -> None:
    said, loaded = loaded_by("profiles", "list")
    assert "demo-tank" in said
    assert loaded & (SLOW - {"pydantic"}) == set()
    assert "pydantic" in loaded
