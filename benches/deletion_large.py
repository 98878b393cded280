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
# Readings are standard normal and the rate varies by 0.01: the density of a reading left out has a
# relative variance of 1e-4, so that scores differ from those at rate 0 by less than 5 readings
# times 4 errors of a mean of 1000, 0.01/32, and half a readings' square times 1e-4.
GAP = 0.02
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
seconds, used = [], []
for _ in range(int(sys.argv[4])):
    began, busy = time.perf_counter(), time.process_time()
    left = fit.leave_out()
    seconds.append(time.perf_counter() - began)
    used.append(time.process_time() - busy)
str(left)
extra = status("VmHWM") - before
# A reading left out scores nearly as under the rate that all share.
exact = -0.5 * readings.astype(float) ** 2
gap = float(np.abs(left.by_group.value - exact).max())
print(extra, min(seconds), min(used), gap)
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
        extra, took, used, gap = (float(part) for part in done.stdout.split())
        seconds.append(used)
        good &= extra < LIMIT and gap < GAP
        mark = "" if extra < LIMIT else "  ABOVE"
        mark += "" if gap < GAP else "  DISAGREES"
        print(
            f"  {count:>9,} observations: {took:7.2f} s, {used:7.2f} s of processor time, "
            f"{extra:6.1f} MB extra, largest difference from the closed form {gap:.1e}{mark}"
        )
    ratio = seconds[1] / seconds[0]
    good &= LEAST <= ratio <= MOST
    mark = "" if LEAST <= ratio <= MOST else "  OUTSIDE"
    print(
        f"  ten times the data: {ratio:.1f} times the processor time, allowed {LEAST:g} to "
        f"{MOST:g}{mark}"
    )
    return good
