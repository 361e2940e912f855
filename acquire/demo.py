"""The demonstration: a simulated bench with the element beside the axis, scanned, put right, scanned again."""

from __future__ import annotations

import sys
from dataclasses import dataclass
from pathlib import Path
from tempfile import TemporaryDirectory

from acquire.client import Client
from acquire.follow import end_of, new_request, start
from acquire.processes import daemon, simulated_bench
from acquire.results.quantity import Quantity, written
from acquire.store import StoredScan, open_stored
from profiles.load import find
from profiles.scan import PivotCorrection

BENCH = "demo-tank"
SHOWN = ("pivot offset", "mean effective radius", "angle zero")


class ScanFailed(Exception):
    """A scan of the demonstration did not end sealed."""


@dataclass(frozen=True)
class Choice:
    """How long the demonstration takes."""

    scan: str
    speed: str


FAST = Choice("demo-rotation-fast", "20")
REAL = Choice("demo-rotation", "1")


def demo(out: Path, choice: Choice, live: bool) -> None:
    """Run both scans, write stores and reports into `out`, and show what changed.

    Raises:
        ProcessFailed: simulator or daemon did not start.
        ScanFailed: a scan did not end sealed.
    """
    out.mkdir(parents=True, exist_ok=True)
    say("A simulated bench: an invented hydrophone on a rotation axis that misses its element.")
    with TemporaryDirectory(prefix="truepivot-") as name:
        folder = Path(name)
        endpoint = f"ipc://{folder / 'daemon.socket'}"
        with (
            simulated_bench(find("bench", BENCH), folder, "--speed", choice.speed) as bench,
            daemon(bench, endpoint),
            Client(endpoint) as client,
        ):
            first = scan(client, choice.scan, out / "as-found.zarr", None, live)
            correction = correction_from(first)
            say(
                f"\nApplying the pivot correction x = {correction.x_mm} mm, z = {correction.z_mm} mm; scanning again.\n"
            )
            second = scan(client, choice.scan, out / "corrected.zarr", correction, live)
    finish(out, first, second)


def scan(client: Client, name: str, store: Path, correction: PivotCorrection | None, live: bool) -> StoredScan:
    """One scan to its end."""
    start(client, new_request(name, store, correction))
    state = end_of(client, live)
    if state.state != "sealed":
        raise ScanFailed(f"the scan ended {state.state}: {state.reason}")
    if live:
        for finding in state.findings.values():
            say(f"[{finding['severity']}] {finding['code']}: {finding['summary']}")
    return open_stored(store)


def correction_from(stored: StoredScan) -> PivotCorrection:
    """The correction that the scan's own results advise."""
    offsets = {str(q.conditions["axis"]): q.value or 0.0 for q in quantities(stored) if q.name == "pivot offset"}
    return PivotCorrection(x_mm=round(offsets["x"] * 1e3, 4), z_mm=round(offsets["z"] * 1e3, 4))


def quantities(stored: StoredScan) -> list[Quantity]:
    """Quantities of a store."""
    from acquire.results.summary import quantities_of

    return quantities_of(stored)


def finish(out: Path, first: StoredScan, second: StoredScan) -> None:
    """Reports, and both results side by side."""
    from acquire.report.write import write_report

    write_report(first, out / "as-found.html")
    write_report(second, out / "corrected.html")
    say(f"\n{'':<34} {'as found':>24} {'corrected':>24}")
    for before, after in zip(chosen(first), chosen(second), strict=True):
        label = " ".join([before.name, str(before.conditions.get("axis", ""))]).strip()
        say(f"{label:<34} {shown(before):>24} {shown(after):>24}")
    say(f"{'cautions standing at the end':<34} {cautions(first):>24} {cautions(second):>24}")
    say(f"\nPictures and findings: {out / 'as-found.html'} and {out / 'corrected.html'}")
    say(f"All numbers: truepivot results {out / 'corrected.zarr'}")


def chosen(stored: StoredScan) -> list[Quantity]:
    """The quantities that are shown side by side."""
    return [q for q in quantities(stored) if q.name in SHOWN]


def shown(q: Quantity) -> str:
    """Value with uncertainty."""
    factor, unit = (1e3, "mm") if q.unit == "m" else (1.0, "°")
    return f"{written(q.value, q.standard_uncertainty, factor)} {unit}"


def cautions(stored: StoredScan) -> str:
    """Codes of the findings above a note."""
    codes = [f["code"] for f in stored.findings() if f["severity"] != "note"]
    return ", ".join(codes) or "none"


def say(line: str) -> None:
    """To the terminal."""
    sys.stdout.write(line + "\n")
    sys.stdout.flush()
