"""An estimate that is right and precise is called sound (METHODS 3: at least 80 % of the time).

Two easy problems with N(0, 1) draws, 4 chains of 500, 80 seeds each: a shift by 1/2 (weights have
all moments) and a widening to precision 0.7 (tail shape 0.3 by algebra). For each quantity first
that its 95 % intervals do cover, then that it is called sound. Where the true rate of "sound" is
0.95, fewer than 64 of 80 come with probability 4e-7; coverage of 0.93 gives fewer than 62 of 80
with probability 2e-6: 54 comparisons, false alarm below 1e-4 in all.
"""

from __future__ import annotations

from collections.abc import Callable
from functools import cache

import numpy as np
import pytest
from scipy import stats

import steelyard as sy

SEED = 20_261_219
REPEATS = 80
RATIOS: dict[str, Callable[[np.ndarray], np.ndarray]] = {
    "shifted": lambda x: 0.5 * x,
    "widened": lambda x: 0.15 * x**2 + 0.2 * x,
}
TARGETS = {"shifted": stats.norm(0.5, 1), "widened": stats.norm(0.2 / 0.7, 0.7**-0.5)}
BASE = stats.norm(0, 1)

Ask = Callable[[sy.Answer], sy.Estimate]
QUANTITIES: dict[str, tuple[Ask, Callable[[object], float]]] = {
    "mean": (lambda a: a.mean("x"), lambda t: t.mean()),
    "sd": (lambda a: a.sd("x"), lambda t: t.std()),
    "median": (lambda a: a.quantile("x", 0.5), lambda t: t.ppf(0.5)),
    "lower quantile": (lambda a: a.quantile("x", 0.1), lambda t: t.ppf(0.1)),
    "probability": (lambda a: a.prob("x > 0.5"), lambda t: t.sf(0.5)),
    "shift": (lambda a: a.shift("x"), lambda t: t.mean()),
    "shift of the sd": (lambda a: a.shift("x", "sd"), lambda t: t.std() - 1),
    "shift of the median": (lambda a: a.shift("x", ("quantile", 0.5)), lambda t: t.ppf(0.5)),
    "shift of a probability": (lambda a: a.shift("x > 0.5"), lambda t: t.sf(0.5) - BASE.sf(0.5)),
    "largest gap": (
        lambda a: a.distance("x").largest_gap,
        lambda t: np.max(np.abs(t.cdf(GRID) - BASE.cdf(GRID))),
    ),
    "Wasserstein distance": (
        lambda a: a.distance("x").wasserstein,
        lambda t: np.sum(np.abs(t.cdf(GRID) - BASE.cdf(GRID))) * (GRID[1] - GRID[0]),
    ),
    "log evidence ratio": (lambda a: a.log_evidence_ratio, None),
    "divergence": (
        lambda a: a.divergence,
        lambda t: -np.log(t.std()) + (t.var() + t.mean() ** 2 - 1) / 2,
    ),
}
GRID = np.linspace(-12, 12, 240_001)
PROBLEM = pytest.mark.parametrize("problem", RATIOS)
QUANTITY = pytest.mark.parametrize("quantity", QUANTITIES)


@cache
def _found(problem: str) -> dict[str, list[sy.Estimate]]:
    rng = np.random.default_rng(SEED)
    found: dict[str, list[sy.Estimate]] = {name: [] for name in QUANTITIES}
    for _ in range(REPEATS):
        x = rng.normal(size=(4, 500))
        answer = sy.weigh(RATIOS[problem](x), {"x": x})
        for name, (ask, _) in QUANTITIES.items():
            found[name].append(ask(answer))
    return found


def _truth(problem: str, quantity: str) -> float:
    if quantity == "log evidence ratio":
        # log E exp(a x² + b x) = b²/(2(1 − 2a)) − ½ log(1 − 2a)
        a, b = {"shifted": (0.0, 0.5), "widened": (0.15, 0.2)}[problem]
        return b**2 / (2 * (1 - 2 * a)) - 0.5 * np.log(1 - 2 * a)
    return float(QUANTITIES[quantity][1](TARGETS[problem]))


@PROBLEM
@QUANTITY
def test_intervals_of_the_easy_problems_cover(problem: str, quantity: str) -> None:
    truth = _truth(problem, quantity)
    intervals = [e.error_interval() for e in _found(problem)[quantity]]
    covered = sum(bool(low <= truth <= high) for low, high in intervals)
    assert covered >= 62


# The shift of an sd under weights of infinite fourth moment is the one hard cell among these: an
# interval of normal quantiles covers 81 % there, and a third of the data sets have one draw that
# carries the estimate, which is what is called strained. It must stay answerable, not easy.
LEAST = {("widened", "shift of the sd"): 32}


@PROBLEM
@QUANTITY
def test_estimates_of_the_easy_problems_are_called_sound(problem: str, quantity: str) -> None:
    sound = sum(bool(e.verdict.is_sound) for e in _found(problem)[quantity])
    reasons = {
        r.code for e in _found(problem)[quantity] for r in e.verdict.reasons if r.level < "sound"
    }
    assert sound >= LEAST.get((problem, quantity), 64), f"{sound} of {REPEATS} sound: {reasons}"


@PROBLEM
def test_answers_of_the_easy_problems_are_called_sound(problem: str) -> None:
    rng = np.random.default_rng(SEED + 1)
    sound = 0
    for _ in range(REPEATS):
        x = rng.normal(size=(4, 500))
        sound += bool(sy.weigh(RATIOS[problem](x), {"x": x}).verdict.is_sound)
    assert sound >= 64
