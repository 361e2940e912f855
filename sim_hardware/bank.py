"""A bank: a file of stored captures that is served in place of the tank."""

from __future__ import annotations

import zipfile
from dataclasses import dataclass, fields
from pathlib import Path

import numpy as np
from numpy.typing import NDArray

from sim_hardware.digitise import Codes

Floats = NDArray[np.float64]


class BankError(ValueError):
    """The bank file cannot be used; the message is one line."""


@dataclass(frozen=True)
class Bank:
    """Stored points in the order in which they were measured; n points of N samples.

    Attributes:
        carriage: (n, 5) targets of the stage, m and rad; reported_before, reported_after: (n, 5) its reports.
        counts: (n, N), int8 or int16.
        volts_per_count, volts_at_zero, interval_s, start_s, full_scale_v, temperature_c: (n,).
        averages: (n,), whole numbers.
        lowest, highest: the counts at the rails.
        strict: answer only what was measured; otherwise captures are served in turn whatever the pose.
    """

    carriage: Floats
    reported_before: Floats
    reported_after: Floats
    counts: Codes
    volts_per_count: Floats
    volts_at_zero: Floats
    interval_s: Floats
    start_s: Floats
    full_scale_v: Floats
    averages: NDArray[np.int64]
    lowest: NDArray[np.int64]
    highest: NDArray[np.int64]
    temperature_c: Floats
    strict: NDArray[np.bool_]

    def __len__(self) -> int:
        return int(self.counts.shape[0])

    @classmethod
    def read(cls, path: Path) -> Bank:
        """Raises BankError: no such file, no such arrays, or shapes that do not fit each other."""
        try:
            with path.open("rb") as file, np.load(file, allow_pickle=False) as stored:
                arrays = {f.name: stored[f.name] for f in fields(cls) if f.name in stored}
        except (OSError, ValueError, zipfile.BadZipFile, EOFError) as exc:
            raise BankError(f"{path}: cannot be read as a bank: {exc}") from exc
        missing = [f.name for f in fields(cls) if f.name not in arrays]
        if missing:
            raise BankError(f"{path}: not in the bank: {', '.join(missing)}")
        counts = arrays["counts"]
        if counts.ndim != 2 or 0 in counts.shape or counts.dtype.newbyteorder("=") not in (np.int8, np.int16):
            raise BankError(f"{path}: counts must be int8 or int16 of shape (points, samples), none of them 0")
        n = counts.shape[0]
        shapes = {
            **dict.fromkeys(("carriage", "reported_before", "reported_after"), (n, 5)),
            **dict.fromkeys(("lowest", "highest", "strict"), ()),
        }
        problems = [
            f"{name} has shape {array.shape}, not {shapes.get(name, (n,))}"
            for name, array in arrays.items()
            if name != "counts" and array.shape != shapes.get(name, (n,))
        ]
        if problems:
            raise BankError(f"{path}: {'; '.join(problems)}")
        arrays["counts"] = np.ascontiguousarray(counts, dtype=counts.dtype.newbyteorder("="))
        return cls(**arrays)
