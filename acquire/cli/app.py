"""The program and its commands, and how errors end: one line, and an exit code that says whose they are."""

from __future__ import annotations

import sys

import typer

from acquire.cli import bench_commands, profile_commands, store_commands

USER_MISTAKE, FAILURE = 2, 1

app = typer.Typer(
    name="truepivot",
    help="Run rotation and raster scans of hydrophones, and judge the data while the scan runs.",
    no_args_is_help=True,
    add_completion=False,
    pretty_exceptions_enable=False,
    rich_markup_mode=None,
)
bench_commands.add_to(app)
store_commands.add_to(app)
app.add_typer(profile_commands.app, name="profiles")

# by name, so that knowing an error does not import what raises it
MISTAKES = {
    "ProfileError",
    "ProfileNotFound",
    "PlanRefused",
    "RequestRefused",
    "MeasurementError",
    "NoEndpoint",
    "NotAStore",
    "UserMistake",
}
FAILURES = {
    "DaemonSilent",
    "BenchUnusable",
    "RecorderFailed",
    "ProcessFailed",
    "DriverError",
    "ScanFailed",
    "ReplayDiffers",
    "StoreDamaged",
}


def main() -> None:
    """Entry point of the command `truepivot`."""
    try:
        app(standalone_mode=True)
    except Exception as error:
        names = {kind.__name__ for kind in type(error).__mro__}
        if not names & (MISTAKES | FAILURES):
            raise
        sys.stderr.write(f"truepivot: {error}\n")
        sys.exit(USER_MISTAKE if names & MISTAKES else FAILURE)
