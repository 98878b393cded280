"""
How often `fit.check()` finds faults planted in exact fits, and how often it is alarmed by none.

    python benches/honesty/base_checks.py [--fits 50] [--clean 100] [--seed 0]
"""

from __future__ import annotations

import argparse
import sys
from pathlib import Path

sys.path.insert(0, str(Path(__file__).resolve().parents[2]))

from tests.checking.planted import hierarchy, regression

FAULTS = (
    (hierarchy, "wrong hyperprior", "hyperpriors"),
    (hierarchy, "Jacobian missing", "hyperpriors"),
    (hierarchy, "rows misordered", "rows aligned"),
    (regression, "sd 0.6 claimed for 0.5", "prior and likelihood together"),
    (regression, "likelihood doubled", "prior and likelihood together"),
    (regression, "prior doubled", "prior and likelihood together"),
    (regression, "prior dropped", "prior and likelihood together"),
)
ALARMS = 0.015


def main() -> int:
    """Print both tables; 1 where clean fits alarm more often than promised."""
    parser = argparse.ArgumentParser(description=__doc__.splitlines()[1])
    parser.add_argument("--fits", type=int, default=50, help="fits with each fault")
    parser.add_argument("--clean", type=int, default=100, help="clean fits of each model")
    parser.add_argument("--seed", type=int, default=0)
    options = parser.parse_args()
    for make, fault, check in FAULTS:
        seeds = range(options.seed, options.seed + options.fits)
        found = sum(_finds(make(seed, fault), check) for seed in seeds)
        print(f"{fault:26} found in {found} of {options.fits} by {check!r}")
    alarms = 0
    for make in (hierarchy, regression):
        for seed in range(options.seed, options.seed + options.clean):
            alarms += any(f.status == "found" for f in make(seed, "").check())
    print(f"false alarms on {alarms} of {2 * options.clean} clean fits")
    return int(alarms > ALARMS * 2 * options.clean)


def _finds(fit: object, check: str) -> bool:
    return any(f.check == check and f.status == "found" for f in fit.check())  # type: ignore[attr-defined]


if __name__ == "__main__":
    sys.exit(main())
