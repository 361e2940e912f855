"""What every model of a profile does with bad input: nothing unknown passes, and all is told at once."""

from __future__ import annotations

import tomllib
from typing import Any

import pytest
import tomli_w
from hypothesis import given
from hypothesis import strategies as st

from profiles.errors import ProfileError
from profiles.load import MODELS, Kind, read, validate
from tests.profiles.tables import Place, Tables, all_shipped, changed, key, places_of_tables, shipped

NAMES: list[tuple[Kind, str]] = [(kind, name) for kind, name, _ in all_shipped()]
LETTERS = "abcdefghijklmnopqrstuvwxyz_"

# place in demo-rotation -> values that are wrong there, whatever stands elsewhere
WRONG_IN_A_SCAN: dict[Place, list[Any]] = {
    ("format_version",): [0, 2, "1"],
    ("name",): ["Has Space", "", "-x", 3],
    ("sensor",): ["NEEDLE", 4],
    ("highest_mhz",): [0, -1.0, "36", True, float("nan"), float("inf")],
    ("revisit_every",): [-1, 2.5, "10"],
    ("position", "z_mm"): [0, -120, "120", float("inf")],
    ("capture", "averages"): [0, 70_000, 1.5, True],
    ("capture", "sample_rate_mhz"): [0, -250, "250"],
    ("capture", "points"): [63, 10_000_001, 5000.5, "5000"],
    ("capture", "lead_us"): [-1, "4"],
    ("rotation", "span_deg"): [0, 181, "90"],
    ("rotation", "step_deg"): [0, -0.5, 91],
}


def problems(tables: Tables, kind: Kind) -> tuple[str, ...]:
    with pytest.raises(ProfileError) as caught:
        validate(tables, kind)
    return caught.value.problems


def told_keys(lines: tuple[str, ...]) -> list[str]:
    return [line.split(":", 1)[0] for line in lines]


@given(name=st.sampled_from(NAMES), word=st.text(LETTERS, min_size=1, max_size=12), data=st.data())
def test_an_unknown_key_is_refused_by_name_in_every_table(
    name: tuple[Kind, str], word: str, data: st.DataObject
) -> None:
    kind, profile = name
    tables = shipped(kind, profile)
    place = (*data.draw(st.sampled_from(places_of_tables(tables))), f"no_{word}")
    lines = problems(changed(tables, {place: data.draw(st.sampled_from([0, "x", [1]]))}), kind)
    assert [line for line in lines if line.startswith(f"{key(place)}: unknown key; ")], lines
    assert len(lines) == 1


@given(data=st.data())
def test_every_problem_is_told_at_once_and_nothing_else(data: st.DataObject) -> None:
    places = data.draw(st.sets(st.sampled_from(sorted(WRONG_IN_A_SCAN)), min_size=1))
    changes = {place: data.draw(st.sampled_from(WRONG_IN_A_SCAN[place])) for place in places}
    lines = problems(changed(shipped("scan", "demo-rotation"), changes), "scan")
    assert sorted(told_keys(lines)) == sorted(key(place) for place in places)
    assert all(" given; allowed: " in line for line in lines), lines


@given(name=st.sampled_from(NAMES), data=st.data())
def test_a_key_that_is_needed_is_missed_by_name(name: tuple[Kind, str], data: st.DataObject) -> None:
    kind, profile = name
    tables = shipped(kind, profile)
    needed = [key for key, field in MODELS[kind].model_fields.items() if field.is_required()]
    gone = data.draw(st.sets(st.sampled_from(sorted(needed)), min_size=1))
    lines = problems(changed(tables, dict.fromkeys([(k,) for k in gone])), kind)
    assert {f"{k}: missing" for k in gone} <= set(lines)


@pytest.mark.parametrize(("kind", "name"), NAMES)
def test_a_resolved_profile_is_read_again_as_the_same(kind: Kind, name: str) -> None:
    profile = validate(shipped(kind, name), kind)
    resolved = profile.model_dump(mode="json", exclude_none=True)
    assert validate(tomllib.loads(tomli_w.dumps(resolved)), kind) == profile
    assert validate(profile.model_dump(mode="json"), kind) == profile


@given(truth=st.dictionaries(st.text(LETTERS), st.integers() | st.text(LETTERS) | st.lists(st.integers()), max_size=4))
def test_the_simulators_table_never_reaches_a_bench(truth: dict[str, Any]) -> None:
    plain = shipped("bench", "demo-tank")
    with_truth = validate(plain | {"simulation": truth}, "bench")
    assert with_truth == validate(plain, "bench")
    assert "simulation" not in with_truth.model_dump()
    assert getattr(with_truth, "simulation", None) is None


def test_the_simulators_table_is_in_the_file_that_a_bench_without_it_was_read_from() -> None:
    path = next(p for k, n, p in all_shipped() if (k, n) == ("bench", "demo-tank"))
    assert "simulation" in read(path)
    bench = validate(read(path), "bench")
    assert "0.18" not in repr(bench)
    assert "0.18" in path.read_text("utf-8")


@pytest.mark.parametrize("table", ["position", "capture", "rotation"])
def test_only_a_bench_may_have_a_simulation_table(table: str) -> None:
    scan = shipped("scan", "demo-rotation")
    assert told_keys(problems(scan | {"simulation": {}}, "scan")) == ["simulation"]
    assert told_keys(problems(changed(scan, {(table, "simulation"): {}}), "scan")) == [f"{table}.simulation"]


def test_profiles_do_not_change_after_reading() -> None:
    profile = validate(shipped("sensor", "needle-0p4"), "sensor")
    with pytest.raises(ValueError, match="frozen"):
        setattr(profile, "name", "other")  # noqa: B010  written so that the types of the model do not object
    assert profile.name == "needle-0p4"
