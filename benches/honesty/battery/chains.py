"""Draws that are not independent: autocorrelated, unequal and repeated."""

from __future__ import annotations

from collections.abc import Iterator
from typing import Any

import numpy as np
from scipy import signal

import steelyard as sy

from .problem import Array, Ask, Problem, exact_answers, normal, weighed


def problems() -> Iterator[Problem]:
    """All of them; targets N(m, 1) over N(0, 1), so that the weights have all moments."""
    for rho in (0.0, 0.5, 0.9, 0.98):
        for by in (0.3, 0.8):
            yield _moved(f"AR(1) {rho}", f"by {by}", by, _tilted(rho, by))
    for rho in (0.5, 0.9):
        yield _moved(f"AR(1) {rho}", "base itself", 0.0, _tilted(rho, 0.0))
    yield _moved("AR(1) 0.5", "by 0.5, 4 × 200", 0.5, _tilted(0.5, 0.5, 200))
    yield _moved("AR(1) 0.9", "by 0.5, 4 × 5,000", 0.5, _tilted(0.9, 0.5, 5000))
    for by in (0.3, 0.8):
        yield _moved("unequal chains", f"by {by}", by, _unequal(by))
        yield _moved("repeated draws", f"chains that stand still, by {by}", by, _still(by))
        yield _moved("repeated draws", f"drawn again without order, by {by}", by, _again(by))
    for by in (0.4, 1.0):
        yield _moved("base weights", f"from N(0, 1.2²), by {by}", by, _weighted(by))


def _moved(family: str, name: str, by: float, ask: Ask) -> Problem:
    exact = exact_answers(normal(by, 1), normal(0, 1), 0.0)
    if by == 0:
        # Without a change these are zero by definition: nothing is estimated.
        del exact["log ratio"], exact["shift"]
    return Problem(family, name, True, ask, exact)


def autoregression(rng: np.random.Generator, rho: float, chains: int, length: int) -> Array:
    """Stationary AR(1) chains with N(0, 1) margins."""
    noise = rng.normal(size=(chains, length)) * np.sqrt(1 - rho**2)
    noise[:, 0] = rng.normal(size=chains)
    return np.asarray(signal.lfilter([1.0], [1.0, -rho], noise, axis=1))


def _log_ratio(by: float) -> Any:
    return lambda x: by * x - by**2 / 2


def _tilted(rho: float, by: float, length: int = 1000) -> Ask:
    return weighed(lambda rng: autoregression(rng, rho, 4, length), _log_ratio(by))


def _unequal(by: float) -> Ask:
    """Chains of unequal length and quality, told apart by labels."""
    parts = ((2000, 0.3), (1000, 0.6), (700, 0.9), (300, 0.9))
    label = np.repeat(np.arange(len(parts)), [length for length, _ in parts])

    def ask(rng: np.random.Generator) -> Any:
        x = np.concatenate([autoregression(rng, rho, 1, n)[0] for n, rho in parts])
        ratio = _log_ratio(by)
        fit = sy.Fit({"x": x}, chain=label)
        return fit.reweigh(sy.log_ratio(lambda draws: ratio(draws["x"])))

    return ask


def _still(by: float) -> Ask:
    """Chains that keep a value with probability 0.8, as rejections make them."""

    def sample(rng: np.random.Generator) -> Array:
        x = rng.normal(size=(4, 1000))
        moves = rng.random((4, 1000)) < 0.2
        moves[:, 0] = True
        last = np.maximum.accumulate(np.where(moves, np.arange(1000), 0), axis=1)
        return np.take_along_axis(x, last, axis=1)

    return weighed(sample, _log_ratio(by))


def _again(by: float) -> Ask:
    """1,500 independent draws, 4,000 of them taken with replacement and shuffled."""

    def ask(rng: np.random.Generator) -> Any:
        x = rng.choice(rng.normal(size=1500), size=4000)
        ratio = _log_ratio(by)
        fit = sy.Fit({"x": x}, ordered=False)
        return fit.reweigh(sy.log_ratio(lambda draws: ratio(draws["x"])))

    return ask


def _weighted(by: float) -> Ask:
    """Draws of N(0, 1.2²) that arrive with weights which make them N(0, 1)."""

    def ask(rng: np.random.Generator) -> Any:
        x = 1.2 * rng.normal(size=(4, 1000))
        ratio = _log_ratio(by)
        fit = sy.Fit({"x": x}, log_weights=x**2 / 2.88 - x**2 / 2)
        return fit.reweigh(sy.log_ratio(lambda draws: ratio(draws["x"])))

    return ask
