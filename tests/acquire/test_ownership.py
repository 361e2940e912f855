"""Locks that fall with the process that held them."""

from __future__ import annotations

import subprocess
import sys
from pathlib import Path

import pytest

from acquire.ownership import OwnedByAnother, held, held_instruments, is_held


def test_a_second_owner_is_told_who_the_first_is(tmp_path: Path) -> None:
    lock = tmp_path / "new" / "a.lock"
    with held(lock, "the bench", "the daemon at ipc:///a"):
        assert is_held(lock)
        with (
            pytest.raises(OwnedByAnother, match="the bench belongs to the daemon at ipc:///a already: end that one"),
            held(lock, "the bench", "me"),
        ):
            pytest.fail("two owners")
    assert not is_held(lock)
    with held(lock, "the bench", "me"):
        assert is_held(lock)


def test_what_was_never_held_is_free(tmp_path: Path) -> None:
    assert not is_held(tmp_path / "none.lock")


def test_a_killed_owner_holds_nothing_any_more(tmp_path: Path) -> None:
    lock = tmp_path / "a.lock"
    words = f"""
import time
from pathlib import Path
from acquire.ownership import held
with held(Path({str(lock)!r}), "it", "me"):
    print("held", flush=True)
    time.sleep(60)
"""
    with subprocess.Popen([sys.executable, "-c", words], stdout=subprocess.PIPE) as process:
        assert process.stdout is not None
        process.stdout.readline()
        assert is_held(lock)
        process.kill()
        process.wait()
    assert not is_held(lock)


def test_an_instrument_has_one_owner_whatever_else_the_benches_hold(tmp_path: Path) -> None:
    with (
        held_instruments(["TCPIP::127.0.0.1::5025::SOCKET", "/dev/null"], tmp_path, "the daemon at A"),
        held_instruments(["TCPIP::127.0.0.1::5026::SOCKET"], tmp_path, "the daemon at B"),
        pytest.raises(OwnedByAnother, match=r"instrument at /dev/\.\./dev/null belongs to the daemon at A"),
        held_instruments(["/dev/../dev/null"], tmp_path, "the daemon at C"),
    ):
        pytest.fail("two owners")


def test_a_serial_line_is_the_same_under_another_name(tmp_path: Path) -> None:
    line, link = tmp_path / "line", tmp_path / "link"
    line.touch()
    link.symlink_to(line)
    with (
        held_instruments([f"serial://{line}"], tmp_path, "the daemon at A"),
        pytest.raises(OwnedByAnother, match="belongs to the daemon at A"),
        held_instruments([f"serial://{link}"], tmp_path, "the daemon at B"),
    ):
        pytest.fail("two owners")
