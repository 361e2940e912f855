import os
import random
import resource
import signal
import subprocess
import sys
import threading
import time
from pathlib import Path
from typing import Any

import msgspec
import numpy as np
import psutil
import pytest
import xarray as xr

from acquire import recorder as recorder_module
from acquire.journal import journal_folder
from acquire.layout import points_in_chunk
from acquire.recorder import Recorder, RecorderFailed
from acquire.store import NotAStore, open_stored
from tests.acquire.making import SAMPLES, circumstances, counts_of, header, record_of

decode = msgspec.msgpack.Decoder().decode


def as_mappings(events: list[Any]) -> list[dict[str, Any]]:
    return [decode(e) if isinstance(e, msgspec.Raw) else msgspec.to_builtins(e) for e in events]


def recorded(
    store: Path, points: int, planned: int | None = None, sealed: bool = True, dtype: str = "int16"
) -> list[Any]:
    """Record so many points; all events."""
    planned = planned or points
    events: list[Any] = []
    with Recorder(store, header(), circumstances(planned), dtype, SAMPLES, planned) as recorder:
        for i in range(points):
            recorder.put(record_of(i, planned), counts_of(i, planned, dtype))
            events += recorder.poll()
        events += recorder.finish(sealed)
    return as_mappings(events)


def test_every_point_is_announced_seen_and_kept(tmp_path: Path) -> None:
    events = recorded(tmp_path / "a.zarr", 150)
    assert [e["index"] for e in events if e["type"] == "point"] == list(range(150))
    assert sum(e["count"] for e in events if e["type"] == "stored") == 150
    assert [e["last"] for e in events if e["type"] == "stored"][-1] == 149
    stored = open_stored(tmp_path / "a.zarr")
    assert stored.sealed
    assert stored.records == [record_of(i, 150) for i in range(150)]
    assert all(np.array_equal(stored.counts(i), counts_of(i, 150)) for i in range(150))
    assert not journal_folder(tmp_path / "a.zarr").exists()


@pytest.mark.parametrize("dtype", ["int8", "int16"])
def test_xarray_opens_a_sealed_store_unaided(tmp_path: Path, dtype: str) -> None:
    recorded(tmp_path / "a.zarr", 70, dtype=dtype)
    with xr.open_zarr(tmp_path / "a.zarr") as data:  # warnings are errors
        assert data["counts"].dims == ("point", "sample")
        assert data["counts"].dtype == np.dtype(dtype)
        assert data["components"].dims == ("point", "frequency")
        assert all("units" in v.attrs and "long_name" in v.attrs for v in data.data_vars.values())
        assert data["sample"].attrs["units"] == "s"
        assert bool(data["committed"].all())
        assert np.array_equal(data["counts"][13], counts_of(13, 70, dtype))
        assert data.attrs["sealed"] is True


def test_xarray_opens_a_store_that_was_broken_off_and_the_mask_says_what_is_there(tmp_path: Path) -> None:
    recorded(tmp_path / "a.zarr", 70, planned=100, sealed=False)
    with xr.open_zarr(tmp_path / "a.zarr") as data:
        assert data["committed"].values.tolist() == [True] * 70 + [False] * 30
        assert data.attrs["sealed"] is False


def test_the_stored_numbers_are_those_of_the_counts_to_the_bit(tmp_path: Path) -> None:
    recorded(tmp_path / "a.zarr", 45)
    stored = open_stored(tmp_path / "a.zarr")
    again, changes = stored.judged()
    assert changes == stored.changes
    for a, b in zip(stored.observations(), again, strict=True):
        assert np.array_equal(a.components, b.components)
        assert (a.peak_v, a.square_integral_v2s, a.noise_rms_v) == (b.peak_v, b.square_integral_v2s, b.noise_rms_v)


def test_a_full_ring_makes_the_bench_wait_and_loses_nothing(tmp_path: Path, monkeypatch: pytest.MonkeyPatch) -> None:
    monkeypatch.setattr(recorder_module, "RING_BYTES", 1)
    monkeypatch.setattr(recorder_module, "FEWEST_SLOTS", 2)
    recorded(tmp_path / "a.zarr", 90)
    assert len(open_stored(tmp_path / "a.zarr").records) == 90


def test_a_recorder_that_stood_still_and_a_daemon_that_does_not_listen_do_not_block_each_other(tmp_path: Path) -> None:
    """Hundreds of lines make events larger than the pipe. Would both sides wait, this test would not end."""
    planned = 1200
    wide = circumstances(planned, drive_hz=0.2e6, frequencies_hz=np.arange(1, 200) * 0.2e6)
    counts = counts_of(0, planned)
    with Recorder(tmp_path / "a.zarr", header(), wide, "int16", SAMPLES, planned) as recorder:
        (process,) = recorders()
        process.suspend()
        going_on = threading.Timer(0.5, process.resume)
        going_on.start()
        for i in range(planned):
            recorder.put(record_of(i, planned), counts)
        recorder.finish(sealed=True)
        going_on.join()
    assert len(open_stored(tmp_path / "a.zarr").records) == planned


def test_all_that_was_handed_over_is_kept_when_the_daemon_ends_without_a_word(tmp_path: Path) -> None:
    with Recorder(tmp_path / "a.zarr", header(), circumstances(300), "int16", SAMPLES, 300) as recorder:
        for i in range(200):
            recorder.put(record_of(i, 300), counts_of(i, 300))
    assert open_stored(tmp_path / "a.zarr").records == [record_of(i, 300) for i in range(200)]


@pytest.mark.parametrize("number", [signal.SIGINT, signal.SIGTERM, signal.SIGHUP])
def test_signals_that_are_for_the_daemon_do_not_end_the_recorder(tmp_path: Path, number: signal.Signals) -> None:
    with Recorder(tmp_path / "a.zarr", header(), circumstances(70), "int16", SAMPLES, 70) as recorder:
        for i in range(70):
            if i == 30:
                recorders()[0].send_signal(number)
            recorder.put(record_of(i, 70), counts_of(i, 70))
        recorder.finish(sealed=True)
    assert open_stored(tmp_path / "a.zarr").sealed


FOREIGN: dict[str, tuple[dict[str, Any], int, str, str]] = {
    "a shorter record": ({}, SAMPLES - 1, "int16", "599 samples of int16 instead of 600 of int16"),
    "one sample": ({}, 1, "int16", "1 samples"),
    "a wider type": ({}, SAMPLES, "int32", "600 samples of int32 instead of 600 of int16"),
    "another interval": ({"interval_s": 2e-8}, SAMPLES, "int16", "2e-08 s between samples"),
    "another start": ({"start_s": 79e-6}, SAMPLES, "int16", "begins at 7.9e-05 s"),
    "a point left out": ({"index": 2}, SAMPLES, "int16", "point 2 of 3 came where 1 was due"),
    "a point twice": ({"index": 0}, SAMPLES, "int16", "point 0 of 3 came where 1 was due"),
}


@pytest.mark.parametrize(("changes", "samples", "dtype", "said"), FOREIGN.values(), ids=FOREIGN.keys())
def test_a_point_that_does_not_belong_to_the_scan_is_refused_and_the_others_stay(
    tmp_path: Path, changes: dict[str, Any], samples: int, dtype: str, said: str
) -> None:
    with Recorder(tmp_path / "a.zarr", header(), circumstances(3), "int16", SAMPLES, 3) as recorder:
        recorder.put(record_of(0, 3), counts_of(0, 3))
        with pytest.raises(RecorderFailed, match=said):
            recorder.put(msgspec.structs.replace(record_of(1, 3), **changes), np.zeros(samples, dtype))
    assert open_stored(tmp_path / "a.zarr").records == [record_of(0, 3)]


def test_more_points_than_planned_are_refused(tmp_path: Path) -> None:
    with Recorder(tmp_path / "a.zarr", header(), circumstances(1), "int16", SAMPLES, 1) as recorder:
        recorder.put(record_of(0, 1), counts_of(0, 1))
        with pytest.raises(RecorderFailed, match="point 1 of 1"):
            recorder.put(record_of(1, 1), counts_of(1, 1))


def test_a_scan_with_points_missing_is_not_sealed(tmp_path: Path) -> None:
    with Recorder(tmp_path / "a.zarr", header(), circumstances(3), "int16", SAMPLES, 3) as recorder:
        recorder.put(record_of(0, 3), counts_of(0, 3))
        with pytest.raises(RecorderFailed, match="only 1 of 3 points"):
            recorder.finish(sealed=True)
    assert not open_stored(tmp_path / "a.zarr").sealed


def test_a_lone_point_is_judged_and_announced_without_waiting_for_others(tmp_path: Path) -> None:
    with Recorder(tmp_path / "a.zarr", header(), circumstances(9), "int16", SAMPLES, 9) as recorder:
        recorder.put(record_of(0, 9), counts_of(0, 9))
        kinds: set[str] = set()
        until = time.monotonic() + 30
        while not kinds >= {"point", "stored"} and time.monotonic() < until:
            kinds |= {e["type"] for e in as_mappings(recorder.poll())}
            time.sleep(0.005)
    assert kinds >= {"point", "stored"}


def test_long_records_make_chunks_of_fewer_points(tmp_path: Path) -> None:
    samples, planned = 1_500_000, 7
    long = circumstances(planned)
    with Recorder(tmp_path / "a.zarr", header(), long, "int16", samples, planned) as recorder:
        for i in range(planned):
            recorder.put(record_of(i, planned), np.full(samples, i, np.int16))
        recorder.finish(sealed=True)
    stored = open_stored(tmp_path / "a.zarr")
    assert points_in_chunk(tmp_path / "a.zarr") == 2
    assert [int(stored.counts(i)[-1]) for i in range(planned)] == list(range(planned))


def test_a_store_that_exists_is_not_written_over(tmp_path: Path) -> None:
    recorded(tmp_path / "a.zarr", 3)
    with (
        pytest.raises(RecorderFailed, match="exists already"),
        Recorder(tmp_path / "a.zarr", header(), circumstances(3), "int16", SAMPLES, 3),
    ):
        pass
    assert len(open_stored(tmp_path / "a.zarr").records) == 3


@pytest.mark.parametrize("points", [1, 63, 64, 65, 130])
def test_a_scan_that_was_broken_off_goes_on(tmp_path: Path, points: int) -> None:
    store = tmp_path / "a.zarr"
    recorded(store, points, planned=140, sealed=False)
    with Recorder(store, header(), circumstances(140), "int16", SAMPLES, 140, continue_store=True) as recorder:
        assert recorder.already_stored == points
        for i in range(points, 140):
            recorder.put(record_of(i, 140), counts_of(i, 140))
        recorder.finish(sealed=True)
    unbroken = tmp_path / "b.zarr"
    recorded(unbroken, 140)
    assert_same(store, unbroken, 140)


def assert_same(one: Path, other: Path, points: int) -> None:
    a, b = open_stored(one), open_stored(other)
    assert a.records == b.records
    assert a.changes == b.changes
    assert all(np.array_equal(a.counts(i), b.counts(i)) for i in range(points))


@pytest.mark.parametrize("planned", [139, 141])
def test_another_scan_is_not_continued_into_a_store(tmp_path: Path, planned: int) -> None:
    recorded(tmp_path / "a.zarr", 5, planned=140, sealed=False)
    with (
        pytest.raises(RecorderFailed, match="another scan"),
        Recorder(tmp_path / "a.zarr", header(), circumstances(planned), "int16", SAMPLES, planned, continue_store=True),
    ):
        pass


def test_what_is_no_store_is_said_in_one_line(tmp_path: Path) -> None:
    with pytest.raises(NotAStore, match="is no store of a scan"):
        open_stored(tmp_path)


def recorders(parent: int | None = None) -> list[psutil.Process]:
    """Of this process, or of another; never those of others, which are at work beside the tests."""
    return [p for p in psutil.Process(parent).children() if "acquire.recorder_process" in p.cmdline()]


def run_until_killed(store: Path, planned: int, victim: str, delay_s: float, *extra: str) -> int:
    """Start the recording parent, kill it or its recorder; how many points were announced by then."""
    parent = subprocess.Popen(
        [sys.executable, "-m", "tests.acquire.recording", str(store), str(planned), *extra],
        stdout=subprocess.PIPE,
        stderr=subprocess.DEVNULL,
        text=True,
        start_new_session=True,
    )
    try:
        assert parent.stdout is not None
        already = int(parent.stdout.readline())
        (mine,) = recorders(parent.pid)
        time.sleep(delay_s)
        os.kill(mine.pid if victim == "recorder" else parent.pid, signal.SIGKILL)
        said, _ = parent.communicate(timeout=60)
        mine.wait(30)
    finally:
        if parent.poll() is None:
            parent.kill()
            parent.wait()
    return max((int(line) for line in said.split()), default=already)


@pytest.mark.slow
@pytest.mark.parametrize("victim", ["recorder", "daemon"])
def test_no_announced_point_is_lost_whichever_process_is_killed(tmp_path: Path, victim: str) -> None:
    """Six kills at random moments; after each the scan goes on, and ends as if nothing had happened."""
    store, planned = tmp_path / "a.zarr", 2000
    rng = random.Random(victim)
    announced = 0
    for attempt in range(6):
        extra = ("continue",) if store.exists() else ()
        announced = max(announced, run_until_killed(store, planned, victim, rng.uniform(0.05, 0.5), *extra))
        found = open_stored(store).records
        assert len(found) >= announced, f"kill {attempt}"
    subprocess.run(
        [sys.executable, "-m", "tests.acquire.recording", str(store), str(planned), "continue"],
        check=True,
        stdout=subprocess.DEVNULL,
        timeout=90,
    )
    stored = open_stored(store)
    assert stored.sealed
    assert stored.records == [record_of(i, planned) for i in range(planned)]
    assert all(np.array_equal(stored.counts(i), counts_of(i, planned)) for i in range(planned))
    assert stored.judged()[1] == stored.changes


@pytest.mark.skipif(not hasattr(resource, "prlimit"), reason="another process's limits can be set on Linux only")
def test_a_disk_that_takes_no_more_is_one_clear_line_and_what_was_stored_stays(tmp_path: Path) -> None:
    store, planned = tmp_path / "a.zarr", 200
    announced: list[int] = []

    def record_all(recorder: Recorder) -> None:
        for i in range(planned):
            recorder.put(record_of(i, planned), counts_of(i, planned))
            announced.extend(e["count"] for e in as_mappings(recorder.poll()) if e["type"] == "stored")
            time.sleep(0.002)
        recorder.finish(sealed=True)

    with Recorder(store, header(), circumstances(planned), "int16", SAMPLES, planned) as recorder:
        pid = recorders()[0].pid
        resource.prlimit(pid, resource.RLIMIT_FSIZE, (40_000, 40_000))  # no file of it may grow beyond this
        with pytest.raises(RecorderFailed, match=r"the disk is full|File too large") as failure:
            record_all(recorder)
    assert "\n" not in str(failure.value)
    stored = open_stored(store)
    assert sum(announced) <= len(stored.records) < planned
    assert len(stored.records) > 0
    assert all(np.array_equal(stored.counts(r.index), counts_of(r.index, planned)) for r in stored.records)


def test_nothing_stays_behind(tmp_path: Path) -> None:
    recorded(tmp_path / "a.zarr", 10)
    assert recorders() == []
