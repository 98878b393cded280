"""Peak memory of a reduction over a large log likelihood, beyond that of the array itself."""

from __future__ import annotations

import subprocess
import sys

# Megabytes that a reduction may need.
LIMIT = 64

WORK = """
import resource, sys
import numpy as np
from steelyard import _core, weights
x = np.full((4000, int(sys.argv[2])), 0.5, dtype=sys.argv[3])
x[0] = np.arange(x.shape[1]) % 7
small = x[:, :50]
work = {
    "kernel describe": lambda x: _core.describe(x),
    "kernel tail_shape": lambda x: _core.tail_shape(x, np.ones(x.shape[1])),
    "weights.log_sum_exp": lambda x: weights.log_sum_exp(x, axis=0),
    "weights.effective_size": lambda x: weights.effective_size(x, axis=0),
}[sys.argv[1]]
work(small)
before = resource.getrusage(resource.RUSAGE_SELF).ru_maxrss
work(x)
print(resource.getrusage(resource.RUSAGE_SELF).ru_maxrss - before)
"""


def report(small: bool) -> bool:
    """Print one line a reduction; whether all stay below the limit."""
    columns = 4000 if small else 20_000
    print(f"\nPeak extra memory over (4000, {columns}); limit {LIMIT} MB")
    good = True
    for name in (
        "kernel describe",
        "kernel tail_shape",
        "weights.log_sum_exp",
        "weights.effective_size",
    ):
        for kind in ("float64", "float32"):
            done = subprocess.run(
                [sys.executable, "-c", WORK, name, str(columns), kind],
                capture_output=True,
                text=True,
                check=True,
            )
            extra = int(done.stdout) / 1024
            good &= extra < LIMIT
            mark = "" if extra < LIMIT else "  above the limit"
            print(f"  {name:24} {kind:8} {extra:7.1f} MB{mark}")
    return good
