"""Where profiles are found, and what is said when they are not."""

from __future__ import annotations

from collections.abc import Mapping
from pathlib import Path
from types import MappingProxyType

import pytest

from profiles.errors import ProfileError, ProfileNotFound
from profiles.load import (
    FOLDER_VARIABLE,
    available,
    find,
    load_any,
    load_bench,
    load_instrument,
    load_scan,
    load_sensor,
    load_source,
    shipped_folder,
    user_folder,
)

NOTHING: Mapping[str, str] = MappingProxyType({})


def copy_of(kind_folder: str, name: str, to: Path, replaced: Mapping[str, str] = NOTHING) -> Path:
    text = (shipped_folder() / kind_folder / f"{name}.toml").read_text("utf-8")
    for old, new in replaced.items():
        assert old in text
        text = text.replace(old, new)
    to.parent.mkdir(parents=True, exist_ok=True)
    to.write_text(text, "utf-8")
    return to


def test_profiles_of_every_kind_are_found_by_name() -> None:
    assert load_bench("demo-tank").name == "demo-tank"
    assert load_instrument("stage-iso").role == "stage"
    assert load_sensor("needle-0p4").nominal_radius_mm == 0.2
    assert load_source("focused-3").focal_length_mm == 40
    assert load_scan("demo-raster").raster is not None


def test_the_users_own_folder_is_searched_before_the_shipped_profiles(own_folder: Path) -> None:
    assert load_sensor("needle-0p4").highest_mhz == 40
    own = copy_of(
        "sensors", "needle-0p4", own_folder / "sensors" / "needle-0p4.toml", {"highest_mhz = 40": "highest_mhz = 33"}
    )
    assert find("sensor", "needle-0p4") == own
    assert load_sensor("needle-0p4").highest_mhz == 33
    assert find("sensor", "needle-1p0").is_relative_to(shipped_folder())


def test_an_own_profile_stands_beside_the_shipped_ones(own_folder: Path) -> None:
    copy_of("scans", "line-x", own_folder / "scans" / "line-mine.toml", {'"line-x"': '"line-mine"'})
    assert set(available("scan")) > {"line-x", "line-mine"}
    assert load_scan("line-mine").raster == load_scan("line-x").raster


def test_without_the_variable_the_customary_folder_is_used(monkeypatch: pytest.MonkeyPatch, tmp_path: Path) -> None:
    monkeypatch.delenv(FOLDER_VARIABLE)
    monkeypatch.setenv("XDG_CONFIG_HOME", str(tmp_path))
    monkeypatch.setenv("HOME", str(tmp_path))
    assert user_folder().is_relative_to(tmp_path)
    assert user_folder().parts[-2:] == ("truepivot", "profiles")


def test_a_file_is_read_wherever_it_is_and_whatever_its_name(tmp_path: Path) -> None:
    path = copy_of("benches", "quiet-tank", tmp_path / "other.toml")
    assert load_bench(path) == load_bench(str(path)) == load_bench("quiet-tank") == load_any(path)


def test_a_profile_found_by_name_bears_that_name(own_folder: Path) -> None:
    path = copy_of("scans", "line-x", own_folder / "scans" / "mine.toml")
    with pytest.raises(ProfileError) as caught:
        load_scan("mine")
    assert str(caught.value) == f"{path}: name: 'line-x' given; allowed: 'mine', as the file is called"


def test_an_unknown_name_is_told_with_its_neighbour_and_all_that_are_known() -> None:
    with pytest.raises(
        ProfileNotFound, match=r"^no bench is called 'demo-tonk'; did you mean demo-tank\? known: curve"
    ):
        load_bench("demo-tonk")
    with pytest.raises(ProfileNotFound, match=r"^no source is called 'needle-0p4'; known: focused-3, plane-2p25$"):
        load_source("needle-0p4")


def test_a_file_of_another_kind_is_refused(tmp_path: Path) -> None:
    path = copy_of("sensors", "needle-0p4", tmp_path / "x.toml")
    with pytest.raises(ProfileError) as caught:
        load_bench(path)
    assert f"{path}: kind: 'sensor' given; allowed: 'bench'" in caught.value.problems


@pytest.mark.parametrize(
    ("content", "told"),
    [
        (b"x = = 1\n", "is not TOML: Invalid value (at line 1, column 5)"),
        (b'kind = "scan"\nname = \n', "is not TOML: Invalid value (at line 2, column 8)"),
        (b"title = 'caf\xe9'\n", "is not UTF-8 text (byte 12)"),
        (b"", "kind: None given; allowed: instrument, bench, sensor, source, scan"),
        (b'kind = "tank"\n', "kind: 'tank' given; allowed: instrument, bench, sensor, source, scan"),
        (b"kind = [1]\n", "kind: [1] given; allowed: instrument, bench, sensor, source, scan"),
    ],
)
def test_a_file_that_is_no_profile_is_told_in_one_line(content: bytes, told: str, tmp_path: Path) -> None:
    path = tmp_path / "x.toml"
    path.write_bytes(content)
    with pytest.raises(ProfileError) as caught:
        load_any(path)
    assert str(caught.value) == f"{path}: {told}"


def test_a_file_that_is_not_there_is_told(tmp_path: Path) -> None:
    with pytest.raises(ProfileNotFound) as caught:
        load_scan(tmp_path / "none.toml")
    assert str(caught.value) == f"{tmp_path / 'none.toml'}: no such file"
    with pytest.raises(ProfileError, match=r": cannot be read: Is a directory$"):
        load_any(tmp_path)
