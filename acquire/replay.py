"""Replay: simulated instruments serve a stored scan, and the ordinary daemon runs the ordinary scan against them."""

from __future__ import annotations

import tempfile
from collections.abc import Callable
from dataclasses import dataclass
from pathlib import Path

import numpy as np

from acquire.bank import write_bank
from acquire.bench_file import write_bench
from acquire.client import Client
from acquire.follow import end_of, start, stored_request
from acquire.processes import daemon, simulated_bench
from acquire.store import NotAStore, StoredScan, open_stored


@dataclass(frozen=True)
class Comparison:
    """How a replay compares with the scan that it replays."""

    store: Path
    points: int
    replayed: int
    first_other_counts: int | None
    findings_equal: bool
    ended: str

    @property
    def identical(self) -> bool:
        """Counts and findings are the same, to the bit and to the letter."""
        return self.points == self.replayed and self.first_other_counts is None and self.findings_equal

    def lines(self) -> list[str]:
        """For people."""
        counts = (
            "identical" if self.first_other_counts is None else f"different from point {self.first_other_counts} on"
        )
        return [
            f"replayed {self.replayed} of {self.points} points into {self.store} ({self.ended})",
            f"counts: {counts}",
            f"findings: {'identical' if self.findings_equal else 'different'}",
        ]


def replay(stored: StoredScan, out: Path, say: Callable[[str], None]) -> Comparison:
    """Run the scan of a store again on a bank made of it, into `out`, and compare.

    Raises:
        NotAStore: it holds no points, or the scan cannot be replayed.
        ProcessFailed: simulator or daemon did not start.
    """
    if not stored.records:
        raise NotAStore(f"{stored.path} holds no points")
    with tempfile.TemporaryDirectory(prefix="truepivot-") as name:
        folder = Path(name)
        bank, bench, endpoint = folder / "bank.npz", folder / "stored.toml", f"ipc://{folder / 'daemon.socket'}"
        say("preparing the bank")
        write_bank(stored, bank)
        write_bench(stored.job.bench, bench)
        with (
            simulated_bench(bench, folder, "--speed", "max", "--bank", str(bank)) as reached,
            daemon(reached, endpoint),
            Client(endpoint) as client,
        ):
            start(client, stored_request(stored.path, out))
            state = end_of(client, live=False)
    return compare(stored, out, state.state)


def compare(stored: StoredScan, out: Path, ended: str) -> Comparison:
    """Counts bit for bit, findings letter for letter."""
    again = open_stored(out)
    other = None
    for record in stored.records[: len(again.records)]:
        if not np.array_equal(stored.counts(record.index), again.counts(record.index)):
            other = record.index
            break
    return Comparison(
        store=out,
        points=len(stored.records),
        replayed=len(again.records),
        first_other_counts=other,
        findings_equal=stored.changes == again.changes,
        ended=ended,
    )
