"""The two processes that the demo and a replay need: a simulated bench, and a daemon that owns it.

Both end with the block that started them: asked politely first, killed if they do not go.
"""

from __future__ import annotations

import json
import subprocess
import sys
import tempfile
from collections.abc import Iterator, Sequence
from contextlib import contextmanager
from pathlib import Path
from typing import IO

GRACE_S = 10.0


class ProcessFailed(Exception):
    """A process ended before it was ready; the message is its own last line."""


@contextmanager
def simulated_bench(bench: Path, folder: Path, *options: str) -> Iterator[Path]:
    """Run the simulator on free ports; gives the bench file that leads to it, without the truth.

    Raises:
        ProcessFailed: the simulator did not start.
    """
    reached = folder / "bench.toml"
    arguments = [str(bench), "--free-ports", "--write-bench", str(reached), "--with-parent", *options]
    with started("simulator", [sys.executable, "-m", "sim_hardware", *arguments]):
        yield reached


@contextmanager
def daemon(bench: Path, endpoint: str) -> Iterator[None]:
    """Run a daemon on `bench` that answers at `endpoint`.

    Raises:
        ProcessFailed: the daemon did not start.
    """
    with started("daemon", [sys.executable, "-m", "acquire.cli", "serve", str(bench), "--endpoint", endpoint]):
        yield


@contextmanager
def started(name: str, command: Sequence[str]) -> Iterator[None]:
    """Start a process, wait for its ready line (JSON with `ready`), and end it with the block."""
    with tempfile.TemporaryFile("w+") as errors:
        process = subprocess.Popen(
            command,
            stdin=subprocess.PIPE,
            stdout=subprocess.PIPE,
            stderr=errors,
            text=True,
            start_new_session=True,
        )
        try:
            wait_until_ready(name, process, errors)
            yield
        finally:
            end(process)


def wait_until_ready(name: str, process: subprocess.Popen[str], errors: IO[str]) -> None:
    """Read the ready line; a process that ends instead is reported by its last words."""
    if process.stdout is None:
        raise ProcessFailed(f"the {name} has no output to wait for")
    for line in process.stdout:
        try:
            if json.loads(line).get("ready"):
                return
        except (ValueError, AttributeError):
            continue
    process.wait(GRACE_S)
    errors.seek(0)
    words = errors.read().strip().splitlines()
    raise ProcessFailed(f"the {name} did not start: {words[-1] if words else f'exit code {process.returncode}'}")


def end(process: subprocess.Popen[str]) -> None:
    """Close its input, ask it to end, and kill it only if it does not."""
    if process.stdin is not None:
        process.stdin.close()
    if process.poll() is None:
        process.terminate()
        try:
            process.wait(GRACE_S)
        except subprocess.TimeoutExpired:
            process.kill()
            process.wait()
    if process.stdout is not None:
        process.stdout.close()
