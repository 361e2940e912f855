import os
from pathlib import Path

import numpy as np
import pytest
from hypothesis import given, settings
from hypothesis import strategies as st

from acquire.journal import Journal, journal_folder, read_journal
from tests.acquire.making import counts_of, record_of

CHUNK = 8
INT16 = np.dtype(np.int16)


def filled(store: Path, points: int) -> Journal:
    journal = Journal(store, CHUNK)
    for i in range(points):
        journal.add([record_of(i, points)], [counts_of(i, points)])
    journal.sync()
    return journal


def test_what_was_added_is_read_back(tmp_path: Path) -> None:
    store = tmp_path / "a.zarr"
    filled(store, 11).close()
    records, counts = read_journal(store, INT16)
    assert records == [record_of(i, 11) for i in range(11)]
    assert all(np.array_equal(counts[i], counts_of(i, 11)) for i in range(11))


@settings(max_examples=60, deadline=None)
@given(cut=st.integers(1, 12_000))
def test_any_truncation_leaves_a_prefix_of_whole_points(cut: int, tmp_path_factory: pytest.TempPathFactory) -> None:
    store = tmp_path_factory.mktemp("cut") / "a.zarr"
    filled(store, 6).close()
    segment = next(journal_folder(store).glob("segment-*.bin"))
    os.truncate(segment, max(0, segment.stat().st_size - cut))
    records, counts = read_journal(store, INT16)
    assert records == [record_of(i, 6) for i in range(len(records))]
    assert len(records) < 6
    assert sorted(counts) == list(range(len(records)))


def test_a_flipped_bit_ends_what_is_believed(tmp_path: Path) -> None:
    store = tmp_path / "a.zarr"
    filled(store, 6).close()
    segment = next(journal_folder(store).glob("segment-*.bin"))
    data = bytearray(segment.read_bytes())
    data[len(data) // 2] ^= 1
    segment.write_bytes(data)
    records, _ = read_journal(store, INT16)
    assert 0 < len(records) < 6


def test_a_durable_chunk_keeps_its_records_and_loses_its_segment(tmp_path: Path) -> None:
    store = tmp_path / "a.zarr"
    journal = filled(store, 11)
    journal.chunk_is_durable(0, [record_of(i, 11) for i in range(CHUNK)])
    journal.close()
    records, counts = read_journal(store, INT16)
    assert len(records) == 11
    assert sorted(counts) == [8, 9, 10]


def test_records_after_a_gap_are_not_believed(tmp_path: Path) -> None:
    store = tmp_path / "a.zarr"
    journal = Journal(store, CHUNK)
    for i in (0, 1, 3):
        journal.add([record_of(i, 4)], [counts_of(i, 4)])
    journal.close()
    assert [r.index for r in read_journal(store, INT16)[0]] == [0, 1]


def test_removing_it_leaves_nothing(tmp_path: Path) -> None:
    store = tmp_path / "a.zarr"
    filled(store, 3).remove()
    assert list(tmp_path.iterdir()) == []
