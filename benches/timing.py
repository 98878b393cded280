"""How two ways to the same numbers are timed against each other, and verified."""

from __future__ import annotations

import statistics
import time
from collections.abc import Callable
from dataclasses import dataclass
from typing import Any

import numpy as np

from steelyard import _core

# A two-thread figure counts where the probe scales at least so far.
SCALES = 1.8


@dataclass(frozen=True)
class Case:
    """
    One kernel against the script that one would write with NumPy and SciPy.

    Attributes
    ----------
    name, layout : str
        What is computed, and how its data lie in memory.
    twin, ours : callable
        Both return arrays that are compared; `ours` reads the number of threads from the kernels.
    tolerance : float
        Largest difference, relative to one or to the size of the twin's value.
    reason : str
        Why the tolerance is what it is.
    goal : tuple of float or None
        Ratios to reach on one thread and on two.
    compare : bool
        Whether results are the same numbers; where they are random, ours are checked by `verify`.
    verify : callable, optional
        Largest fault of ours, for random results.
    rounds : int
        How often both are timed, in turns.
    """

    name: str
    layout: str
    twin: Callable[[], Any]
    ours: Callable[[], Any]
    tolerance: float
    reason: str
    goal: tuple[float | None, float | None]
    verify: Callable[[Any], float] | None = None
    rounds: int = 7


@dataclass(frozen=True)
class Outcome:
    """Median seconds, the ratio of the shortest, and the largest difference found in the run."""

    case: Case
    twin: float
    one: float
    two: float
    best_ratio: float
    difference: float

    @property
    def verified(self) -> bool:
        return self.difference <= self.case.tolerance

    @property
    def ratios(self) -> tuple[float, float]:
        return self.twin / self.one, self.twin / self.two


def run(case: Case) -> Outcome:
    """Time twin and ours in turns, so that a busy machine slows both."""
    difference = _difference(case)
    wall: dict[str, list[float]] = {"twin": [], "one": [], "two": []}
    for _ in range(case.rounds):
        for key, threads, work in (
            ("twin", 1, case.twin),
            ("one", 1, case.ours),
            ("two", 2, case.ours),
        ):
            _core.set_threads(threads)
            began = time.perf_counter()
            work()
            wall[key].append(time.perf_counter() - began)
    middle = {key: statistics.median(seconds) for key, seconds in wall.items()}
    best = min(wall["twin"]) / min(wall["one"])
    return Outcome(case, middle["twin"], middle["one"], middle["two"], best, difference)


def _difference(case: Case) -> float:
    """Largest difference; also between one thread and two, which must be none."""
    _core.set_threads(1)
    one = [np.array(part, dtype=np.float64) for part in _parts(case.ours())]
    _core.set_threads(2)
    two = [np.array(part, dtype=np.float64) for part in _parts(case.ours())]
    if not all(np.array_equal(a, b, equal_nan=True) for a, b in zip(one, two, strict=True)):
        return float("inf")
    if case.verify is not None:
        return case.verify(one)
    worst = 0.0
    for ours, twin in zip(one, _parts(case.twin()), strict=True):
        size = np.maximum(1.0, np.abs(twin))
        worst = max(worst, float(np.max(np.abs(ours - twin) / size)))
    return worst


def _parts(result: Any) -> tuple[Any, ...]:
    return result if isinstance(result, tuple) else (result,)


def probe() -> float:
    """How far two threads scale here and now: exponentials of data that fit the nearest cache."""
    x = np.random.default_rng(1).normal(size=(2000, 256)).T.copy().T
    seconds = []
    for threads in (1, 2):
        _core.set_threads(threads)
        times = []
        for _ in range(30):
            began = time.perf_counter()
            for _ in range(10):
                _core.log_sum_exp(x)
            times.append(time.perf_counter() - began)
        seconds.append(statistics.median(times))
    return seconds[0] / seconds[1]
