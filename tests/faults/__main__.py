"""Scores on benches drawn at random: `python -m tests.faults truth --family 0 --benches 200`."""

from __future__ import annotations

import argparse
import sys

from tests.faults.truth import scored, table


def main() -> None:
    """Entry point."""
    parser = argparse.ArgumentParser(prog="python -m tests.faults", description=__doc__)
    commands = parser.add_subparsers(required=True)
    truth = commands.add_parser("truth", help="how results lie to the truth, in units of their uncertainty")
    truth.add_argument("--family", type=int, default=0, help="0 for tuning, 1 to be looked at once")
    truth.add_argument("--first", type=int, default=0)
    truth.add_argument("--benches", type=int, default=200)
    given = parser.parse_args()
    for line in table(scored(given.family, range(given.first, given.first + given.benches))):
        sys.stdout.write(line + "\n")


if __name__ == "__main__":
    main()
