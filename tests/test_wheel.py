"""What is installed: the rooms with their profiles, and nothing else."""

from __future__ import annotations

import subprocess
import sys
import zipfile
from pathlib import Path

import pytest

ROOT = Path(__file__).parents[1]
ROOMS = {"acquire", "checks", "drivers", "profiles", "sim_hardware"}
pytestmark = pytest.mark.slow


@pytest.fixture(scope="module")
def wheel(tmp_path_factory: pytest.TempPathFactory) -> Path:
    folder = tmp_path_factory.mktemp("wheel")
    build = [sys.executable, "-m", "hatchling", "build", "-t", "wheel", "-d", str(folder)]
    subprocess.run(build, cwd=ROOT, check=True, capture_output=True, timeout=100)
    (built,) = folder.glob("truepivot-*.whl")
    return built


def test_the_wheel_holds_the_rooms_and_no_tests(wheel: Path) -> None:
    with zipfile.ZipFile(wheel) as archive:
        tops = {name.split("/", 1)[0] for name in archive.namelist()}
    assert {top for top in tops if not top.endswith(".dist-info")} == ROOMS


def test_every_profile_and_module_is_in_the_wheel_byte_for_byte(wheel: Path) -> None:
    files = [p for room in ROOMS for kind in ("*.toml", "*.py", "py.typed") for p in (ROOT / room).rglob(kind)]
    assert sum(p.suffix == ".toml" for p in files) >= 20
    with zipfile.ZipFile(wheel) as archive:
        for path in files:
            assert archive.read(path.relative_to(ROOT).as_posix()) == path.read_bytes()


def test_an_unpacked_wheel_lists_its_profiles(wheel: Path, tmp_path: Path) -> None:
    with zipfile.ZipFile(wheel) as archive:
        archive.extractall(tmp_path / "site")
        entries = archive.read(next(n for n in archive.namelist() if n.endswith("entry_points.txt"))).decode()
    assert "truepivot = acquire.cli:main" in entries
    program = (
        "import sys; sys.path.insert(0, 'site'); sys.argv = ['truepivot', 'profiles', 'list']\n"
        "import profiles; assert 'site' in profiles.__path__[0], profiles.__path__\n"
        "from acquire.cli import main; main()"
    )
    listed = subprocess.run(
        [sys.executable, "-P", "-c", program], cwd=tmp_path, capture_output=True, text=True, timeout=60, check=False
    )
    assert listed.returncode == 0, listed.stderr
    shipped = {path.stem for path in (ROOT / "profiles").glob("*/*.toml")}
    assert {line.split()[1] for line in listed.stdout.splitlines() if line.rstrip().endswith("(shipped)")} == shipped
