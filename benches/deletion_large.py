"""10⁵ and 10⁶ observations × 1000 draws in float32 from a memory map: extra memory, linear time."""

from __future__ import annotations

import subprocess
import sys
import tempfile
from pathlib import Path

# Megabytes that leaving out may need beside the map, and how time may grow by ten times the data.
LIMIT = 256
LEAST, MOST = 9.0, 11.0
DRAWS = 1000
COUNTS = (100_000, 1_000_000)

WORK = """
import ctypes, mmap, sys, time
import numpy as np, steelyard as sy
path, count, draws = sys.argv[1], int(sys.argv[2]), int(sys.argv[3])
rng = np.random.default_rng(1)
rate, readings = 0.01 * rng.normal(size=draws), rng.normal(size=count).astype("f4")
values = np.lib.format.open_memmap(path, mode="w+", dtype="f4", shape=(draws, count))
for s in range(draws):
    values[s] = -0.5 * (readings - np.float32(rate[s])) ** 2
    if s % 50 == 49:
        values.flush()
        values.base.madvise(mmap.MADV_DONTNEED)
del values
fit = sy.Fit({"rate": rate.reshape(4, -1)}, loglik=np.load(path, mmap_mode="r"))
def status(name):
    line = next(l for l in open("/proc/self/status") if l.startswith(name))
    return int(line.split()[1]) / 1024
small = np.asarray(np.load(path, mmap_mode="r")[:, :500])
str(sy.Fit({"rate": rate.reshape(4, -1)}, loglik=small).leave_out())
open("/proc/self/clear_refs", "w").write("5")
before = status("VmRSS")
seconds = []
for _ in range(int(sys.argv[4])):
    began = time.perf_counter()
    left = fit.leave_out()
    seconds.append(time.perf_counter() - began)
exact = -0.5 * np.log1p(rate.var()) - 0.5 * readings**2
str(left)
print(status("VmHWM") - before, min(seconds), left.by_group.value.shape[0], left.verdict.level)
"""


def report() -> bool:
    """Print memory and seconds; whether both stay inside their limits."""
    print(f"\nLeaving out of a float32 memory map, {DRAWS} draws; limit {LIMIT} MB")
    seconds, good = [], True
    for count in COUNTS:
        with tempfile.TemporaryDirectory() as folder:
            repeats = "3" if count < COUNTS[-1] else "1"
            arguments = [str(Path(folder) / "loglik.npy"), str(count), str(DRAWS), repeats]
            done = subprocess.run(
                [sys.executable, "-c", WORK, *arguments], capture_output=True, text=True, check=True
            )
        extra, took = (float(part) for part in done.stdout.split()[:2])
        seconds.append(took)
        good &= extra < LIMIT
        mark = "" if extra < LIMIT else "  ABOVE"
        print(f"  {count:>9,} observations: {took:7.2f} s, {extra:6.1f} MB extra{mark}")
    ratio = seconds[1] / seconds[0]
    good &= LEAST <= ratio <= MOST
    mark = "" if LEAST <= ratio <= MOST else "  OUTSIDE"
    print(f"  ten times the data: {ratio:.1f} times the time, allowed {LEAST:g} to {MOST:g}{mark}")
    return good
