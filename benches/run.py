"""
Benchmarks that verify their own answers: every kernel against the script that one would write.

Run by `make bench`. ``--small`` takes small arrays, to see that everything works; ``--large`` adds
what needs gigabytes in the directory for temporary files; names choose among the benchmarks. Ends
with an error where twin and kernel disagree.
"""

from __future__ import annotations

import argparse
import importlib
import os
import sys
from pathlib import Path

# Settings of a machine that choose slower code in the linear algebra of NumPy.
_SLOWING = ("OPENBLAS_CORETYPE", "OPENBLAS_L2_SIZE")
# The linear algebra that both sides call keeps to one thread: the figures are of one.
_SINGLE = {"OPENBLAS_NUM_THREADS": "1", "MKL_NUM_THREADS": "1", "OMP_NUM_THREADS": "1"}

NAMES = (
    "log_sum",
    "smooth",
    "resample",
    "quantile",
    "influence",
    "long_run",
    "mean",
    "multi_sample",
    "swap",
    "sweep",
    "densities",
    "deletion",
    "leave_out_errors",
    "memory",
)


def main() -> int:
    wanted = {name: value for name, value in os.environ.items() if name not in _SLOWING} | _SINGLE
    if wanted != dict(os.environ):
        os.execve(sys.executable, [sys.executable, *sys.argv], wanted)
    sys.path.insert(0, str(Path(__file__).parent))
    parser = argparse.ArgumentParser(description=__doc__)
    parser.add_argument("names", nargs="*", help="which benchmarks")
    parser.add_argument("--small", action="store_true", help="small arrays")
    parser.add_argument("--large", action="store_true", help="gigabytes on disk too")
    chosen = parser.parse_args()
    return benchmarks(chosen.names or list(NAMES), chosen.small, chosen.large)


def benchmarks(names: list[str], small: bool, large: bool = False) -> int:
    from timing import SCALES, probe

    scaling = probe()
    counts = scaling >= SCALES
    print(f"two threads scale by {scaling:.2f} here; {'they count' if counts else 'not counted'}")
    print(heading())
    good = True
    for name in names:
        module = importlib.import_module(name)
        if hasattr(module, "report"):
            good &= module.report(small)
            continue
        if hasattr(module, "main"):
            print()
            good &= module.main([]) == 0
            continue
        for case in module.cases(small):
            good &= one(case, counts)
        if hasattr(module, "more"):
            good &= module.more(small)
        if large and hasattr(module, "large"):
            good &= module.large()
    print(f"\ntwo threads scaled by {probe():.2f} at the end")
    return 0 if good else 1


def heading() -> str:
    columns = "{:42} {:26} {:>9} {:>9} {:>9} {:>7} {:>7} {:>7} {:>9} {:>9} {:>9}"
    return columns.format(
        "kernel",
        "data",
        "twin ms",
        "1 thr.",
        "2 thr.",
        "ratio 1",
        "by best",
        "ratio 2",
        "goals",
        "largest",
        "allowed",
    )


def one(case: object, counts: bool) -> bool:
    from timing import Case, run

    assert isinstance(case, Case)
    outcome = run(case)
    first, second = outcome.ratios
    goals = "/".join("–" if goal is None else f"{goal:g}" for goal in case.goal)
    print(
        f"{case.name:42} {case.layout:26} {1e3 * outcome.twin:9.2f} {1e3 * outcome.one:9.2f} "
        f"{1e3 * outcome.two:9.2f} {first:7.1f} {outcome.best_ratio:7.1f} "
        f"{second if counts else float('nan'):7.1f} {goals:>9} {outcome.difference:9.1e} "
        f"{case.tolerance:9.0e}" + ("" if outcome.verified else f"  DISAGREES ({case.reason})"),
        flush=True,
    )
    return outcome.verified


if __name__ == "__main__":
    sys.exit(main())
