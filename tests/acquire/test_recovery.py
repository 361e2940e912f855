"""What is found after a death, and how a scan goes on from there."""

import os
import signal
import time
from collections.abc import Iterator
from contextlib import contextmanager
from pathlib import Path

import msgspec
import numpy as np
import psutil
import pytest
import xarray as xr

from acquire.journal import journal_folder
from acquire.layout import chunk_file
from acquire.recorder import Recorder, RecorderFailed
from acquire.recovery import StoreDamaged
from acquire.store import open_stored
from tests.acquire.making import SAMPLES, circumstances, counts_of, header, record_of

PLANNED = 300
PATIENCE_S = 30.0


def put_and_kill(store: Path, upto: int, continue_store: bool = False) -> None:
    """Record up to that point, see all of it announced, and kill the recorder."""
    decode = msgspec.msgpack.Decoder().decode
    with Recorder(store, header(), circumstances(PLANNED), "int16", SAMPLES, PLANNED, continue_store) as recorder:
        announced = recorder.already_stored
        for i in range(recorder.already_stored, upto):
            recorder.put(record_of(i, PLANNED), counts_of(i, PLANNED))
        until = time.monotonic() + PATIENCE_S
        while announced < upto and time.monotonic() < until:
            time.sleep(0.01)
            bodies = [decode(e) for e in recorder.poll() if isinstance(e, msgspec.Raw)]
            announced += sum(b["count"] for b in bodies if b["type"] == "stored")
        assert announced == upto
        os.kill(psutil.Process().children()[0].pid, signal.SIGKILL)


def finish(store: Path) -> None:
    with Recorder(store, header(), circumstances(PLANNED), "int16", SAMPLES, PLANNED, continue_store=True) as recorder:
        for i in range(recorder.already_stored, PLANNED):
            recorder.put(record_of(i, PLANNED), counts_of(i, PLANNED))
        recorder.finish(sealed=True)


def assert_holds(store: Path, points: int) -> None:
    stored = open_stored(store)
    assert stored.records == [record_of(i, PLANNED) for i in range(points)]
    assert all(np.array_equal(stored.counts(i), counts_of(i, PLANNED)) for i in range(points))


@contextmanager
def broken_off(store: Path, points: int) -> Iterator[Recorder]:
    with Recorder(store, header(), circumstances(PLANNED), "int16", SAMPLES, PLANNED) as recorder:
        for i in range(points):
            recorder.put(record_of(i, PLANNED), counts_of(i, PLANNED))
        recorder.finish(sealed=False)
        yield recorder


@pytest.mark.parametrize(("torn", "points"), [("segment-00000001.bin", 120), ("points.log", 220)])
def test_points_stored_after_a_torn_entry_are_found_after_another_death(tmp_path: Path, torn: str, points: int) -> None:
    store = tmp_path / "a.zarr"
    put_and_kill(store, 100)
    file = journal_folder(store) / torn
    with file.open("ab") as journal:
        journal.write(b"TPJ1\x40\x00\x00\x00 an entry that the death of the machine left unfinished")
    put_and_kill(store, points, continue_store=True)
    assert_holds(store, points)
    finish(store)
    assert_holds(store, PLANNED)
    assert open_stored(store).judged()[1] == open_stored(store).changes


def test_going_on_after_a_break_and_then_dying_is_read_with_all_its_points(tmp_path: Path) -> None:
    store = tmp_path / "a.zarr"
    with broken_off(store, 70):
        pass
    put_and_kill(store, 150, continue_store=True)
    assert_holds(store, 150)
    finish(store)
    assert_holds(store, PLANNED)
    assert not journal_folder(store).exists()


def test_a_scan_that_was_killed_has_the_findings_of_its_points(tmp_path: Path) -> None:
    """The invented scan has few points across the beam and 22 samples a period: some check always speaks of it."""
    killed, whole = tmp_path / "killed.zarr", tmp_path / "whole.zarr"
    put_and_kill(killed, 200)
    with broken_off(whole, 200):
        pass
    assert open_stored(whole).changes
    assert open_stored(killed).changes == open_stored(whole).changes


def test_reading_a_store_leaves_it_to_its_recorder(tmp_path: Path) -> None:
    store = tmp_path / "a.zarr"
    put_and_kill(store, 70)
    half_written = store / "counts" / "c" / "1" / "0.12345.partial"
    half_written.parent.mkdir(exist_ok=True)
    half_written.write_bytes(b"a chunk on its way")
    before = sorted(p for p in tmp_path.rglob("*"))
    assert len(open_stored(store).observations()) == 70
    assert sorted(p for p in tmp_path.rglob("*")) == before
    put_and_kill(store, 71, continue_store=True)
    assert not half_written.exists()


def test_xarray_opens_what_a_killed_recorder_left(tmp_path: Path) -> None:
    put_and_kill(tmp_path / "a.zarr", 70)
    with xr.open_zarr(tmp_path / "a.zarr") as data:  # warnings are errors
        assert data.sizes["point"] == PLANNED
        assert data.attrs["sealed"] is False
        assert not data["committed"].any()  # its journal holds them still


def test_a_chunk_that_is_gone_does_not_read_as_zeros(tmp_path: Path) -> None:
    store = tmp_path / "a.zarr"
    with broken_off(store, 70):
        pass
    chunk_file(store, 1).unlink()
    with pytest.raises(StoreDamaged, match="points 64 and after are missing"):
        open_stored(store).counts(65)


def test_a_flipped_bit_in_a_chunk_is_noticed(tmp_path: Path) -> None:
    store = tmp_path / "a.zarr"
    with broken_off(store, 70):
        pass
    file = chunk_file(store, 0)
    data = bytearray(file.read_bytes())
    data[len(data) // 2] ^= 4
    file.write_bytes(data)
    with pytest.raises(StoreDamaged, match="points 0 and after are damaged"):
        open_stored(store).counts(3)


def test_a_journal_without_its_store_is_not_mixed_with_a_new_scan(tmp_path: Path) -> None:
    journal_folder(tmp_path / "a.zarr").mkdir()
    with (
        pytest.raises(RecorderFailed, match="points of an earlier scan"),
        Recorder(tmp_path / "a.zarr", header(), circumstances(PLANNED), "int16", SAMPLES, PLANNED),
    ):
        pass
    assert not (tmp_path / "a.zarr").exists()


def test_a_store_is_not_continued_with_another_sensor(tmp_path: Path) -> None:
    store = tmp_path / "a.zarr"
    with broken_off(store, 3):
        pass
    other = header()
    other.sensor["nominal_radius_mm"] *= 2
    with (
        pytest.raises(RecorderFailed, match="another scan"),
        Recorder(store, other, circumstances(PLANNED), "int16", SAMPLES, PLANNED, continue_store=True),
    ):
        pass


def test_a_store_is_continued_where_range_and_start_were_found_anew(tmp_path: Path) -> None:
    store = tmp_path / "a.zarr"
    with broken_off(store, 3):
        pass
    other = header()
    other.scan["capture"] |= {"full_scale_v": 0.8, "start_us": 77.0}
    with Recorder(store, other, circumstances(PLANNED), "int16", SAMPLES, PLANNED, continue_store=True) as recorder:
        assert recorder.already_stored == 3
