"""`python -m sim_hardware BENCH.toml`: a simulated bench until SIGTERM, SIGINT or the end of the parent."""

from __future__ import annotations

import argparse
import gc
import json
import sys
import tempfile
from collections.abc import Sequence
from contextlib import ExitStack
from pathlib import Path

from threadpoolctl import threadpool_limits

from profiles.errors import ProfileError
from profiles.load import find, load_bench, load_instrument
from sim_hardware.bank import Bank, BankError
from sim_hardware.bench import BenchError, SimulatedBench, bank_bench, live_bench
from sim_hardware.bench_text import bench_text
from sim_hardware.clock import Timeline
from sim_hardware.serve import EndOfInput, Signals, open_addresses
from sim_hardware.transport import Loop
from sim_hardware.truth import TruthError, read_truth


def _speed(text: str) -> float | None:
    """Simulated seconds per real second; None for `max`."""
    if text == "max":
        return None
    try:
        value = float(text)
    except ValueError:
        value = 0.0
    if not 0 < value < float("inf"):
        raise argparse.ArgumentTypeError(f"{text!r} given; allowed: a number above 0, or max")
    return value


def _seed(text: str) -> int:
    if not text.isdecimal():
        raise argparse.ArgumentTypeError(f"{text!r} given; allowed: a whole number from 0")
    return int(text)


def _parser() -> argparse.ArgumentParser:
    parser = argparse.ArgumentParser(
        prog="python -m sim_hardware",
        description="A simulated bench: instruments around a tank, at the addresses of the bench file.",
    )
    parser.add_argument("bench", metavar="BENCH", help="bench file, or the name of a bench profile")
    parser.add_argument("--speed", type=_speed, default=1.0, help="1: real time, 20: faster, max: at once")
    parser.add_argument("--free-ports", action="store_true", help="free ports and links instead of the addresses")
    parser.add_argument("--write-bench", type=Path, metavar="PATH", help="write the bench with the addresses taken")
    parser.add_argument("--bank", type=Path, metavar="FILE", help="answer from stored captures (.npz)")
    parser.add_argument("--seed", type=_seed, help="of noise and errors; otherwise the one in the bench file")
    parser.add_argument("--with-parent", action="store_true", help="end when standard input ends")
    return parser


def main(arguments: Sequence[str] | None = None) -> int:
    """Exit code: 0 after a clean end, 2 when the bench cannot be simulated."""
    given = _parser().parse_args(arguments)
    try:
        with ExitStack() as stack:
            _run(given, stack)
    except (BenchError, BankError, TruthError, ProfileError) as exc:
        sys.stderr.write(f"sim_hardware: {exc}\n")
        return 2
    return 0


def _run(given: argparse.Namespace, stack: ExitStack) -> None:
    bench = load_bench(given.bench)
    timeline = Timeline(given.speed)
    simulated = _simulate(given, timeline)
    # on a busy machine threads of linear algebra that wait for each other made a capture of 0.1 s take 3 s
    stack.enter_context(threadpool_limits(1, "blas"))
    loop = Loop(timeline, simulated.prepare)
    stack.callback(loop.close)
    Signals(loop)
    if given.with_parent:
        EndOfInput(loop, sys.stdin.fileno())
    folder = Path(stack.enter_context(tempfile.TemporaryDirectory(prefix="bench-"))) if given.free_ports else None
    addresses = open_addresses(loop, bench, simulated.converse, folder)
    if given.write_bench is not None:
        try:
            given.write_bench.write_text(bench_text(bench, addresses), encoding="utf-8")
        except OSError as exc:
            raise BenchError(f"--write-bench: {given.write_bench} cannot be written: {exc.strerror}") from exc
    gc.freeze()  # what is there stays: collections then look at little
    sys.stdout.write(json.dumps({"ready": True, "addresses": addresses}) + "\n")
    sys.stdout.flush()
    loop.run()


def _simulate(given: argparse.Namespace, timeline: Timeline) -> SimulatedBench:
    bench = load_bench(given.bench)
    instruments = {role: load_instrument(attached.profile) for role, attached in bench.instruments.items()}
    for role, instrument in instruments.items():
        if instrument.role != role:
            raise BenchError(f"instruments.{role}: profile {instrument.name} is of a {instrument.role}")
    if given.bank is not None:
        return bank_bench(bench, instruments, timeline, Bank.read(given.bank))
    from sim_hardware.tank import SimulatedTank

    truth = read_truth(find("bench", given.bench))
    if given.seed is not None:
        truth = truth.model_copy(update={"seed": given.seed})
    return live_bench(bench, instruments, timeline, SimulatedTank(truth), truth.mechanics, truth.seed)


if __name__ == "__main__":
    sys.exit(main())
