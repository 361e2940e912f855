"""Commands about stored scans, and the demonstration."""

from __future__ import annotations

import sys
from pathlib import Path
from typing import Annotated

import typer

Store = Annotated[Path, typer.Argument(help="a stored scan, NAME.zarr")]


class ReplayDiffers(Exception):
    """A replay did not come out the same."""


def add_to(app: typer.Typer) -> None:
    """Register the commands."""
    for command in (results, report, check, replay, demo):
        app.command()(command)


def results(
    store: Store, as_json: Annotated[bool, typer.Option("--json", help="all of it, for programs")] = False
) -> None:
    """Print what a scan has measured: each quantity with its standard uncertainty."""
    from acquire.results.summary import as_json as json_of
    from acquire.results.summary import lines, quantities_of
    from acquire.store import open_stored

    stored = open_stored(store)
    quantities = quantities_of(stored)
    if as_json:
        sys.stdout.write(json_of(stored, quantities) + "\n")
        return
    for line in lines(quantities):
        sys.stdout.write(line + "\n")


def report(
    store: Store,
    out: Annotated[Path | None, typer.Option(help="file to write; left out: NAME.html beside the store")] = None,
) -> None:
    """Write the report: one HTML file with pictures, numbers and findings."""
    from acquire.report.write import write_report
    from acquire.store import open_stored

    path = out or store.with_suffix(".html")
    write_report(open_stored(store), path)
    sys.stdout.write(f"{path}\n")


def check(store: Store) -> None:
    """Run the checks once more over the stored counts, and say what they say."""
    from acquire.store import open_stored

    stored = open_stored(store)
    _, changes = stored.judged()
    for change in changes:
        f = change["finding"]
        sys.stdout.write(
            f"[{f['severity']}] {f['code']} {change['action']} at point {change['at_point']}: {f['summary']}\n"
        )
    if stored.sealed:
        same = changes == stored.changes
        sys.stdout.write("as the live checks said\n" if same else "not as the live checks said: another version?\n")


def replay(
    store: Store,
    out: Annotated[Path | None, typer.Option(help="where to store the replay; left out: NAME-replay.zarr")] = None,
) -> None:
    """Serve a stored scan from simulated instruments, run the same scan against them, and compare."""
    from acquire.replay import replay as run_replay
    from acquire.store import open_stored

    path = (out or store.with_name(f"{store.stem}-replay.zarr")).absolute()
    comparison = run_replay(open_stored(store), path, _say)
    for line in comparison.lines():
        sys.stdout.write(line + "\n")
    if not comparison.identical:
        raise ReplayDiffers("the replay is not identical")


def _say(line: str) -> None:
    sys.stdout.write(line + "\n")


def demo(
    out: Annotated[
        Path | None, typer.Option(help="folder for stores and reports; left out: truepivot-demo here")
    ] = None,
    fast: Annotated[bool, typer.Option("--fast", help="fewer points, and a bench 20 times as fast")] = False,
) -> None:
    """Run a simulated bench: a scan that finds its pivot off, the correction, and the scan again."""
    from datetime import datetime

    from acquire.demo import FAST, REAL
    from acquire.demo import demo as run_demo

    folder = out or Path(f"truepivot-demo-{datetime.now():%Y%m%d-%H%M%S}")
    run_demo(folder.absolute(), FAST if fast else REAL, live=sys.stdout.isatty())
