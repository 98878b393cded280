"""
Hold Steelyard's errors and verdicts against problems with known answers.

    python benches/honesty/run.py [--seed N] [--short] [--repeats R] [--workers W] [--picture FILE]

Prints coverage, shares and error ratios by family with their binomial errors, then each bound with
its figure, and ends with status 1 where one is not met. Without a seed one is chosen and printed.
What is counted, and which cells, stands in battery/bounds.py.
"""

from __future__ import annotations

import argparse
import secrets
import sys
import time
from pathlib import Path

from battery.bounds import bounds
from battery.collection import all_problems
from battery.measure import measure
from battery.report import draw, table, verdicts_on

REPEATS = 600
# Enough for the overall bounds; families are then held to theirs with ALLOWANCE errors to spare.
SHORT_REPEATS = 20
# A figure may fall short by so many of its own errors in the short form: 3.7 is 1e-4 one-sided,
# for some 40 bounds together a false alarm in at most 0.4 % of seeds for a tool just on its bounds.
ALLOWANCE = 3.7


def main(arguments: list[str] | None = None) -> int:
    """Run, print, draw; 0 where all bounds are met."""
    parser = argparse.ArgumentParser(description=__doc__.splitlines()[1])
    parser.add_argument("--seed", type=int, default=None, help="chosen and printed if not given")
    parser.add_argument("--short", action="store_true", help="few data sets, bounds with allowance")
    parser.add_argument("--repeats", type=int, default=None, help="data sets of each problem")
    parser.add_argument("--workers", type=int, default=2)
    parser.add_argument("--picture", type=Path, default=None, help="where to write the picture")
    options = parser.parse_args(arguments)
    seed = secrets.randbelow(10**9) if options.seed is None else options.seed
    repeats = options.repeats or (SHORT_REPEATS if options.short else REPEATS)
    allowance = ALLOWANCE if options.short else 0.0
    began = time.monotonic()
    count = len(all_problems())
    print(f"seed {seed}: {count} problems, {repeats} data sets each", flush=True)
    cells = measure(seed, repeats, range(count), options.workers)
    found = bounds(cells)
    print(table(cells), "", *verdicts_on(found, allowance), "", sep="\n")
    if options.picture is not None:
        drawn = draw(cells, options.picture, seed)
        print(f"picture in {options.picture}" if drawn else "no picture: matplotlib is missing")
    missed = [bound.name for bound in found if not bound.met(allowance)]
    print(
        f"{len(found) - len(missed)} of {len(found)} bounds met in {time.monotonic() - began:.0f} s"
    )
    return 1 if missed else 0


if __name__ == "__main__":
    sys.exit(main())
