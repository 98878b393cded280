"""
Hold the ladder against targets that plain weights call refit, and against MCMC from scratch.

    python benches/ladder.py [--seed N] [--repeats R] [--workers W]

The cells are those of the honesty battery's normal bases that are moved, scaled, turned or made
Student-t too far for their weights, up to 50 dimensions; a data set (4 chains of 1,000 independent
draws) counts where the plain answer's verdict is refit. Printed for each problem: the share of
answers that the ladder calls sound, the coverage of its 95 % intervals over quantities called
sound, and evaluations of the densities, beside those of a random-walk sampler that reaches the
same error of the mean of the first coordinate. That sampler is given the step that is best for the
target's own scale, and is counted without its burn-in. Ends with status 1 where fewer than 95 % are
sound or fewer than 93 % of intervals cover.
"""

from __future__ import annotations

import argparse
import math
import os
import sys
import time
from collections.abc import Callable
from concurrent.futures import ProcessPoolExecutor
from dataclasses import dataclass
from typing import Any

import numpy as np
from numpy.typing import NDArray
from scipy import special, stats

import steelyard as sy

Array = NDArray[np.float64]
RARE = 0.01


@dataclass(frozen=True)
class Problem:
    """A standard normal base in d dimensions, and a target whose first marginal is known."""

    name: str
    d: int
    log_density: Callable[[Array], Array]
    marginal: Any
    log_constant: float


def normal(name: str, d: int, mean: float, sd: float) -> Problem:
    """Every coordinate moved and scaled."""

    def log_density(x: Array) -> Array:
        return np.asarray(-0.5 * (((x - mean) / sd) ** 2).sum(axis=1))

    return Problem(name, d, log_density, stats.norm(mean, sd), d * math.log(sd))


def turned(name: str, d: int, correlation: float) -> Problem:
    """All pairs of coordinates equally correlated."""
    covariance = np.full((d, d), correlation) + (1 - correlation) * np.eye(d)
    precision = np.linalg.inv(covariance)

    def log_density(x: Array) -> Array:
        return np.asarray(-0.5 * ((x @ precision) * x).sum(axis=1))

    constant = 0.5 * float(np.linalg.slogdet(covariance)[1])
    return Problem(name, d, log_density, stats.norm(0, 1), constant)


def student(name: str, d: int, df: float, mean: float) -> Problem:
    """A multivariate Student-t, moved along every coordinate."""

    def log_density(x: Array) -> Array:
        return np.asarray(-(df + d) / 2 * np.log1p(((x - mean) ** 2).sum(axis=1) / df))

    whole = special.gammaln(df / 2) + d / 2 * math.log(df * math.pi) - special.gammaln((df + d) / 2)
    constant = float(whole) - d / 2 * math.log(2 * math.pi)
    return Problem(name, d, log_density, stats.t(df, mean), constant)


PROBLEMS = (
    normal("moved by 4", 1, 4.0, 1.0),
    normal("moved by 3, scaled by 1.6", 2, 3.0, 1.6),
    normal("moved by 1.2", 10, 1.2, 1.0),
    normal("moved by 0.6", 50, 0.6, 1.0),
    normal("scaled by 1.6", 20, 0.0, 1.6),
    normal("scaled by 1.6", 50, 0.0, 1.6),
    normal("scaled by 0.6", 50, 0.0, 0.6),
    turned("correlations of 0.8", 10, 0.8),
    student("Student-t 3, moved by 3", 1, 3.0, 3.0),
    student("Student-t 3, moved by 2", 2, 3.0, 2.0),
    student("Student-t 3, moved by 1", 10, 3.0, 1.0),
    student("Student-t 3, moved by 0.5", 50, 3.0, 0.5),
)
LABELS = ("mean", "sd", "q0.05", "q0.95", "tail", "shift", "log ratio")


def estimates(answer: Any, problem: Problem) -> list[tuple[Any, float]]:
    """Quantities of the first coordinate with what is exactly true; the sd only where it is one."""
    of, limit = problem.marginal, float(problem.marginal.isf(RARE))
    return [
        (answer.mean("x[0]"), float(of.mean())),
        (answer.sd("x[0]"), float(of.std())),
        (answer.quantile("x[0]", 0.05), float(of.ppf(0.05))),
        (answer.quantile("x[0]", 0.95), float(of.ppf(0.95))),
        (answer.prob(f"x[0] > {limit!r}"), RARE),
        (answer.shift("x[0]"), float(of.mean())),
        (answer.log_evidence_ratio, problem.log_constant),
    ]


@dataclass(frozen=True)
class Row:
    """What one data set gave; None for one whose plain answer is not refit."""

    level: str
    rung: str
    evaluations: int
    seconds: float
    error: float
    sound: list[bool]
    covered: list[bool]


def asked(task: tuple[int, int, int]) -> Row | None:
    """One data set of one problem."""
    number, seed, repeat = task
    problem = PROBLEMS[number]
    rng = np.random.default_rng([seed, number, repeat])
    fit = sy.Fit(
        {"x": rng.normal(size=(4, 1000, problem.d))},
        {"x": sy.Flat()},
        lambda draws: -0.5 * (draws["x"] ** 2).sum(axis=1),
    )
    change = sy.swap_loglik(lambda draws: problem.log_density(draws["x"]))
    if fit.reweigh(change).verdict.level > "refit":
        return None
    answer = fit.repair(change, rng=int(rng.integers(2**31)))
    sound, covered = [], []
    for estimate, truth in estimates(answer, problem):
        low, high = estimate.error_interval(0.95)
        sound.append(bool(estimate.verdict.is_sound))
        covered.append(bool(low <= truth <= high))
    ladder = answer.ladder
    error = float(answer.mean("x[0]").error)
    return Row(
        str(answer.verdict.level),
        ladder.chosen,
        ladder.evaluations,
        ladder.seconds,
        error,
        sound,
        covered,
    )


def sampler_evaluations(problem: Problem, error: float, seed: int) -> float:
    """
    Evaluations that a random walk needs for this error of the mean of the first coordinate.

    ``τ sd²/error²`` with τ the integrated autocorrelation time of 200 stationary chains, by batch
    means; the step is ``2.38/√d`` of the target's marginal sd.
    """
    rng = np.random.default_rng([seed, problem.d])
    # A Student-t has its core, not its sd, to be walked through.
    scale = float(np.diff(problem.marginal.ppf([0.16, 0.84]))[0]) / 2
    centre = float(problem.marginal.median())
    x = centre + scale * rng.normal(size=(200, problem.d))
    now = problem.log_density(x)
    kept, steps = [], 200 + 60 * problem.d
    for step in range(2 * steps):
        new = x + 2.38 / math.sqrt(problem.d) * scale * rng.normal(size=x.shape)
        density = problem.log_density(new)
        accept = np.log(rng.random(len(x))) < density - now
        x, now = np.where(accept[:, None], new, x), np.where(accept, density, now)
        if step >= steps:
            kept.append(x[:, 0].copy())
    series = np.array(kept)
    variance = float(series.mean(axis=0).var(ddof=1)) * steps
    return variance / error**2


def covered_where_sound(rows: list[Row]) -> list[bool]:
    """Whether each interval covers, of quantities called sound."""
    return [c for row in rows for s, c in zip(row.sound, row.covered, strict=True) if s]


def line(problem: Problem, rows: list[Row], seed: int) -> str:
    """One row of the table."""
    if not rows:
        return f"{problem.name:28}{problem.d:>3}      0"
    sound = np.mean([row.level == "sound" for row in rows])
    cost = float(np.median([row.evaluations for row in rows]))
    error = float(np.median([row.error for row in rows]))
    walk = sampler_evaluations(problem, error, seed)
    matched = np.mean([row.rung == "moment matching" for row in rows])
    took = np.median([row.seconds for row in rows])
    return (
        f"{problem.name:28}{problem.d:>3} {len(rows):>6} {sound:>6.2f} "
        f"{np.mean(covered_where_sound(rows)):>6.3f} {matched:>8.2f} {cost:>12,.0f} {took:>6.2f} "
        f"{error:>8.4f} {walk:>12,.0f}"
    )


def main(arguments: list[str] | None = None) -> int:
    """Run and print; 0 where both bounds are met."""
    parser = argparse.ArgumentParser(description=__doc__.splitlines()[1])
    parser.add_argument("--seed", type=int, default=2026)
    parser.add_argument("--repeats", type=int, default=25)
    parser.add_argument("--workers", type=int, default=2)
    options = parser.parse_args(arguments)
    os.environ.setdefault("STEELYARD_THREADS", "1")
    began = time.monotonic()
    tasks = [
        (number, options.seed, repeat)
        for repeat in range(options.repeats)
        for number in range(len(PROBLEMS))
    ]
    if options.workers == 1:
        found = [asked(task) for task in tasks]
    else:
        with ProcessPoolExecutor(options.workers) as pool:
            found = list(pool.map(asked, tasks))
    head = f"{'target':28}{'d':>3} {'refit':>6} {'sound':>6} {'cover':>6} {'matched':>8}"
    print(f"{head} {'evaluations':>12} {'s':>6} {'error':>8} {'random walk':>12}")
    for number, problem in enumerate(PROBLEMS):
        rows = [r for t, r in zip(tasks, found, strict=True) if t[0] == number and r is not None]
        print(line(problem, rows, options.seed))
    every = [row for row in found if row is not None]
    levels, hits = [row.level == "sound" for row in every], covered_where_sound(every)
    by_quantity = {
        label: [row.covered[i] for row in every if row.sound[i]] for i, label in enumerate(LABELS)
    }
    print(
        "coverage by quantity: "
        + ", ".join(f"{k} {np.mean(v):.3f} of {len(v)}" for k, v in by_quantity.items() if v)
    )
    sound, cover = float(np.mean(levels)), float(np.mean(hits))
    print(
        f"seed {options.seed}: {len(levels)} refit cells, {sound:.3f} answered sound (bound 0.95), "
        f"{len(hits)} intervals cover {cover:.3f} (bound 0.93), {time.monotonic() - began:.0f} s"
    )
    return 0 if sound >= 0.95 and cover >= 0.93 else 1


if __name__ == "__main__":
    sys.exit(main())
