"""
Log densities of a million draws against the NumPy/SciPy script that one would write.

One line a case: our time, the script's, their ratio, the goal, and the largest difference of the
two results, of the larger of 1 and the value; each case fails if that exceeds 1e-11. Times are the
best of some repeats, both sides in turn; the threads are those given on the command line (default
1 and 2). A figure for two threads counts only where the probe, the same loop on data that fit into
the cache, scales by 1.8 or more.
"""

from __future__ import annotations

import math
import sys
import time
from collections.abc import Callable
from dataclasses import dataclass

import numpy as np
import numpy.typing as npt
from scipy.special import gammaln, log_ndtr

import steelyard as sy
from steelyard import _core
from steelyard.densities import Distribution

Array = npt.NDArray[np.float64]

DRAWS = 1_000_000
REPEATS = 40
LARGEST_DIFFERENCE = 1e-11
HALF_LOG_2PI = 0.5 * math.log(2 * math.pi)


@dataclass(frozen=True)
class Case:
    """A distribution, its draws, the obvious script, and the wanted ratios on 1 and 2 threads."""

    name: str
    distribution: Distribution
    value: Array
    script: Callable[[Array], Array]
    goals: tuple[float, float] | None = None


def _t(x: Array) -> Array:
    df = 4.0
    constant = gammaln((df + 1) / 2) - gammaln(df / 2) - 0.5 * math.log(df * math.pi)
    fall = (df + 1) / 2 * np.log1p(((x - 0.3) / 1.7) ** 2 / df)
    return np.asarray(constant - math.log(1.7) - fall)


def _logistic(x: Array) -> Array:
    z = (x - 0.3) / 1.7
    return np.asarray(-z - 2 * np.log1p(np.exp(-z)) - math.log(1.7))


def _gumbel(x: Array) -> Array:
    z = (x - 0.3) / 1.7
    return np.asarray(-z - np.exp(-z) - math.log(1.7))


def _log_normal(x: Array) -> Array:
    log = np.log(x)
    return np.asarray(-0.5 * ((log - 0.1) / 2) ** 2 - log - math.log(2) - HALF_LOG_2PI)


def _negative_binomial(k: Array) -> Array:
    ways = gammaln(k + 3) - gammaln(k + 1) - gammaln(3.0)
    return np.asarray(ways + 3 * math.log(0.3) + k * math.log(0.7))


def _skew_normal(x: Array) -> Array:
    z = (x - 0.3) / 1.7
    return math.log(2 / 1.7) - 0.5 * z**2 - 0.5 * math.log(2 * math.pi) + log_ndtr(2 * z)


def cases() -> list[Case]:
    """All cases, their draws made from one seed."""
    rng = np.random.default_rng(20_261_219)
    real, positive = rng.normal(size=DRAWS), rng.gamma(3, 1, size=DRAWS)
    share, count = rng.beta(2, 3, size=DRAWS), rng.poisson(7, size=DRAWS).astype(np.float64)
    return [*with_goals(real, positive, share), *others(real, positive, count)]


def with_goals(real: Array, positive: Array, share: Array) -> list[Case]:
    """The families that the goals name."""
    constant = gammaln(5.0) - gammaln(2.0) - gammaln(3.0)
    return [
        Case(
            "normal",
            sy.Normal(0.3, 1.7),
            real,
            lambda x: -0.5 * ((x - 0.3) / 1.7) ** 2 - math.log(1.7) - HALF_LOG_2PI,
        ),
        Case("student-t", sy.StudentT(4, 0.3, 1.7), real, _t, (3.5, 6)),
        Case(
            "gamma",
            sy.Gamma(3, 2),
            positive,
            lambda x: 3 * math.log(2) - gammaln(3.0) + 2 * np.log(x) - 2 * x,
            (3.5, 6),
        ),
        Case(
            "beta",
            sy.Beta(2, 3),
            share,
            lambda x: constant + np.log(x) + 2 * np.log1p(-x),
            (5.5, 10),
        ),
    ]


def others(real: Array, positive: Array, count: Array) -> list[Case]:
    """One family for each other kind of loop."""
    return [
        Case("log-normal", sy.LogNormal(0.1, 2), positive, _log_normal),
        Case(
            "half-Cauchy",
            sy.HalfCauchy(2),
            positive,
            lambda x: math.log(1 / math.pi) - np.log1p((x / 2) ** 2),
        ),
        Case("logistic", sy.Logistic(0.3, 1.7), real, _logistic),
        Case("Gumbel", sy.Gumbel(0.3, 1.7), real, _gumbel),
        Case(
            "Weibull",
            sy.Weibull(1.5, 2),
            positive,
            lambda x: math.log(0.75) + 0.5 * np.log(x / 2) - (x / 2) ** 1.5,
        ),
        Case("skew-normal", sy.SkewNormal(0.3, 1.7, 2), real, _skew_normal),
        Case("Poisson", sy.Poisson(7), count, lambda k: k * math.log(7) - 7 - gammaln(k + 1)),
        Case("negative binomial", sy.NegativeBinomial(7, 3), count, _negative_binomial),
    ]


def best(*functions: Callable[[], object]) -> list[float]:
    """Shortest time of each in milliseconds, taken in turn so that noise meets all alike."""
    times = [math.inf] * len(functions)
    for _ in range(REPEATS):
        for index, function in enumerate(functions):
            start = time.perf_counter()
            function()
            times[index] = min(times[index], 1e3 * (time.perf_counter() - start))
    return times


def scaling() -> float:
    """How much faster two threads are than one where memory does not matter."""
    value, times = np.full(200_000, 0.3), []
    for threads in (1, 2):
        with sy.threads(threads):
            times.append(best(lambda: sy.SkewNormal(0, 1, 2).log_density(value))[0])
    return times[0] / times[1]


def run(case: Case, threads: int) -> bool:
    """Times one case, prints its line, and says whether both results agree."""
    with sy.threads(threads):
        ours, script, copy = best(
            lambda: case.distribution.log_density(case.value),
            lambda: case.script(case.value),
            case.value.copy,
        )
        got = case.distribution.log_density(case.value)
    want = case.script(case.value)
    difference = float((np.abs(got - want) / np.maximum(1, np.abs(want))).max())
    goal = "copy × 1.5" if case.name == "normal" else ""
    if case.goals is not None and threads <= 2:
        goal = f"{case.goals[threads - 1]:g}"
    extra = f"  copy × {ours / copy:.2f}" if case.name == "normal" else ""
    print(
        f"{case.name:18}  {ours:7.2f} ms  {script:7.2f} ms  ratio {script / ours:5.1f}  "
        f"goal {goal:10}  difference {difference:.1e}{extra}"
    )
    return difference <= LARGEST_DIFFERENCE


def main(arguments: list[str]) -> int:
    """Runs all cases for each number of threads; 1 if some results disagree."""
    counts = [int(a) for a in arguments] or [1, 2]
    agreed = True
    print(f"{DRAWS} draws; two threads scale by {scaling():.2f}")
    before = _core.threads()
    for threads in counts:
        print(f"threads: {threads}")
        for case in cases():
            agreed &= run(case, threads)
    _core.set_threads(before)
    return 0 if agreed else 1


if __name__ == "__main__":
    sys.exit(main(sys.argv[1:]))
