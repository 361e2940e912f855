"""README, DEVELOPERS and CHANGELOG say what is there: commands, findings, profiles, files, version."""

from __future__ import annotations

import re
import tomllib
from pathlib import Path

import pytest
import typer.main

from acquire.cli.app import app
from profiles.load import every

ROOT = Path(__file__).parents[1]
README = (ROOT / "README.md").read_text("utf-8")
DEVELOPERS = (ROOT / "DEVELOPERS.md").read_text("utf-8")
CODE = re.compile(r"[\"`]((?:angle|arrival|drift|noise|null|pivot|range|stage)\.[a-z]+(?:-[a-z]+)*)[\"`]")


def commands() -> set[str]:
    group = typer.main.get_command(app)
    return set(getattr(group, "commands", {}))


def lines_of_code(text: str) -> list[str]:
    return [line for block in re.findall(r"```sh\n(.*?)```", text, re.DOTALL) for line in block.splitlines()]


def test_the_readme_begins_with_the_job_in_one_paragraph() -> None:
    title, job, after = README.split("\n\n")[:3]
    assert title == "# truepivot"
    assert "\n" not in job
    assert "rotation and raster scans" in job
    assert after.startswith("**Cautions.**")


def test_the_first_two_commands_set_up_everything_themselves() -> None:
    demo, tests = lines_of_code(README)[:2]
    for line, last in ((demo, ".venv/bin/truepivot demo --fast"), (tests, ".venv/bin/pytest -q")):
        make, install, do = line.split(" && ")
        assert make == "python3 -m venv .venv"
        assert install.startswith(".venv/bin/pip install -q ")
        assert do == last


def test_every_command_is_in_the_readme_and_every_command_of_the_readme_exists() -> None:
    named = set(re.findall(r"truepivot ([a-z]+)\b", "\n".join(lines_of_code(README))))
    assert named == commands()


def test_options_of_the_readme_exist() -> None:
    group = typer.main.get_command(app)
    passed_on = {"simulate"}  # its options are those of the simulator
    for line in lines_of_code(README):
        found = re.search(r"truepivot ([a-z]+)(?: ([a-z]+))?", line)
        if found is None or found[1] in passed_on:
            continue
        command = getattr(group, "commands", {})[found[1]]
        command = getattr(command, "commands", {}).get(found[2], command)
        known = {option for parameter in command.params for option in parameter.opts}
        assert set(re.findall(r"--[a-z][a-z-]*", line.split("#")[0].split("&&")[-1])) <= known, line


def test_every_finding_is_explained_and_every_finding_explained_exists() -> None:
    sources = "\n".join(path.read_text("utf-8") for path in (ROOT / "checks").glob("*.py"))
    raised = {code for code in CODE.findall(sources) if f'"{code}"' in sources}
    section = README.split("### What findings mean")[1].split("\n### ")[0]
    explained = {code for row in section.splitlines() if row.startswith("| `") for code in CODE.findall(row)}
    assert raised == explained


def test_profiles_that_the_readme_names_are_shipped() -> None:
    shipped = {name for _, name, _ in every()}
    named = set(re.findall(r"truepivot (?:simulate|profiles show|run) ((?:demo|quiet|curve)-[a-z-]+)", README))
    assert named
    assert named <= shipped


@pytest.mark.parametrize("text", [README, DEVELOPERS], ids=["README", "DEVELOPERS"])
def test_files_and_folders_that_are_named_are_there(text: str) -> None:
    named = set(re.findall(r"`((?:acquire|checks|drivers|profiles|sim_hardware|tests|\.ci)/[A-Za-z_/.-]*)`", text))
    named |= set(re.findall(r"\]\(([A-Z]+\.md)\)", text))
    assert [name for name in sorted(named) if not (ROOT / name).exists()] == []


def test_the_changelog_speaks_of_this_version() -> None:
    version = tomllib.loads((ROOT / "pyproject.toml").read_text("utf-8"))["project"]["version"]
    assert f"\n## {version}," in (ROOT / "CHANGELOG.md").read_text("utf-8")
