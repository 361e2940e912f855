"""A store as a bank that the simulated instruments can serve: what was captured where, counts and all."""

from __future__ import annotations

from pathlib import Path

import numpy as np

from acquire.store import StoredScan


def write_bank(stored: StoredScan, path: Path, strict: bool = True) -> None:
    """Write an uncompressed `.npz`; `strict` serves a place its own captures and refuses all other places."""
    records = stored.records
    counts = np.stack([stored.counts(r.index) for r in records])
    np.savez(
        path,
        carriage=np.array([r.carriage_commanded for r in records]),
        reported_before=np.array([r.carriage_before for r in records]),
        reported_after=np.array([r.carriage_after for r in records]),
        counts=counts,
        volts_per_count=np.array([r.volts_per_count for r in records]),
        volts_at_zero=np.array([r.volts_at_zero for r in records]),
        interval_s=np.array([r.interval_s for r in records]),
        start_s=np.array([r.start_s for r in records]),
        full_scale_v=np.array([r.full_scale_v for r in records]),
        averages=np.array([r.averages for r in records], np.int64),
        lowest=records[0].lowest,
        highest=records[0].highest,
        temperature_c=np.array([r.temperature_c for r in records]),
        strict=strict,
    )
