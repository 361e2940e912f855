"""Scores on benches drawn at random: `python -m tests.faults truth --family 0 --benches 200`."""

from __future__ import annotations

import argparse
import sys

from tests.faults.bound import lines_of, reached
from tests.faults.truth import scored, table


def main() -> None:
    """Entry point."""
    parser = argparse.ArgumentParser(prog="python -m tests.faults", description=__doc__)
    commands = parser.add_subparsers(required=True)
    truth = commands.add_parser("truth", help="how results lie to the truth, in units of their uncertainty")
    truth.add_argument("--family", type=int, default=0, help="0 for tuning, 1 to be looked at once")
    truth.add_argument("--first", type=int, default=0)
    truth.add_argument("--benches", type=int, default=200)
    bound = commands.add_parser("bound", help="how near the scatter of results comes to the Cramér-Rao bound")
    bound.add_argument("--family", type=int, default=0)
    bound.add_argument("--first", type=int, default=0)
    bound.add_argument("--benches", type=int, default=8)
    bound.add_argument("--seeds", type=int, default=24)
    given = parser.parse_args()
    numbers = range(given.first, given.first + given.benches)
    if "seeds" in given:
        told = lines_of([one for number in numbers for one in reached(given.family, number, given.seeds)])
    else:
        told = table(scored(given.family, numbers))
    for line in told:
        sys.stdout.write(line + "\n")


if __name__ == "__main__":
    main()
