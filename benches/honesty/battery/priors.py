"""Prior swaps in conjugate models, drawn from their exact posteriors."""

from __future__ import annotations

import math
from collections.abc import Iterator
from typing import Any

import numpy as np
from scipy import special, stats

import steelyard as sy

from .problem import Ask, Problem, exact_answers, normal


def problems() -> Iterator[Problem]:
    """All of them: the data of tests/reference, family 1, and a mean known well or hardly."""
    yield from _sleep()
    yield from _placenta()
    yield from _asthma()
    yield from _hardly_changed()


def _asked(posterior: Any, old: Any, new: Any) -> Ask:
    def ask(rng: np.random.Generator) -> Any:
        x = posterior.rvs(size=(4, 1000), random_state=rng)
        return sy.Fit({"x": x}, prior={"x": old}).reweigh(sy.swap_prior(x=new))

    return ask


def _sleep() -> Iterator[Problem]:
    """Ten differences of mean 1.58 whose sd is taken to be 1.23; normal priors."""
    variance, mean = 1.23**2 / 10, 1.58

    def posterior(m: float, s: float) -> tuple[float, float, float]:
        precision = 1 / s**2 + 1 / variance
        centre = (m / s**2 + mean / variance) / precision
        spread = math.sqrt(s**2 + variance)
        return centre, math.sqrt(1 / precision), float(stats.norm.logpdf(mean, m, spread))

    for before, after in (
        ((0.0, 2.0), (1.0, 0.5)),
        ((1.0, 0.5), (0.0, 2.0)),
        ((0.0, 0.2), (0.0, 5.0)),
        ((1.5, 0.6), (1.0, 0.7)),
        ((0.0, 2.0), (3.0, 2.0)),
    ):
        m0, s0, log0 = posterior(*before)
        m1, s1, log1 = posterior(*after)
        ask = _asked(normal(m0, s0), sy.Normal(*before), sy.Normal(*after))
        yield Problem(
            "sleep",
            f"N{after} over N{before}",
            2 / s1**2 > 1 / s0**2,
            ask,
            exact_answers(normal(m1, s1), normal(m0, s0), log1 - log0),
        )


def _placenta() -> Iterator[Problem]:
    """437 girls among 980 births with placenta praevia; beta priors."""
    girls, boys = 437, 543
    for before, after in (
        ((1.0, 1.0), (97.0, 103.0)),
        ((97.0, 103.0), (1.0, 1.0)),
        ((1.0, 1.0), (48.5, 51.5)),
        ((200.0, 200.0), (1.0, 1.0)),
        ((1.0, 1.0), (120.0, 80.0)),
    ):
        base = stats.beta(before[0] + girls, before[1] + boys)
        target = stats.beta(after[0] + girls, after[1] + boys)
        constant = (
            special.betaln(after[0] + girls, after[1] + boys)
            - special.betaln(*after)
            - special.betaln(before[0] + girls, before[1] + boys)
            + special.betaln(*before)
        )
        shape = max(
            1 - (after[0] + girls) / (before[0] + girls), 1 - (after[1] + boys) / (before[1] + boys)
        )
        ask = _asked(base, sy.Beta(*before), sy.Beta(*after))
        yield Problem(
            "placenta",
            f"Beta{after} over Beta{before}",
            shape < 0.5,
            ask,
            exact_answers(target, base, float(constant)),
        )


def _asthma() -> Iterator[Problem]:
    """Three deaths from asthma in an exposure of two, and thirty in twenty; gamma priors."""
    for deaths, exposure, before, after in (
        (3, 2, (3.0, 5.0), (1.0, 1.0)),
        (3, 2, (3.0, 5.0), (2.0, 3.0)),
        (3, 2, (1.0, 1.0), (3.0, 5.0)),
        (30, 20, (3.0, 5.0), (30.0, 20.0)),
        (30, 20, (3.0, 5.0), (1.0, 1.0)),
    ):
        (a0, b0), (a1, b1) = ((prior[0] + deaths, prior[1] + exposure) for prior in (before, after))

        def constant(prior: tuple[float, float], a: float, b: float) -> float:
            return float(
                special.gammaln(a)
                - a * math.log(b)
                - special.gammaln(prior[0])
                + prior[0] * math.log(prior[1])
            )

        base, target = stats.gamma(a0, scale=1 / b0), stats.gamma(a1, scale=1 / b1)
        yield Problem(
            "asthma",
            f"{deaths} deaths, Gamma{after} over Gamma{before}",
            max(1 - a1 / a0, 1 - b1 / b0) < 0.5,
            _asked(base, sy.Gamma(*before), sy.Gamma(*after)),
            exact_answers(target, base, constant(after, a1, b1) - constant(before, a0, b0)),
        )


class Product:
    """A density given up to its constant, on a fine grid; the methods that are asked of it."""

    def __init__(self, log_density: Any, low: float, high: float):
        self.x = np.linspace(low, high, 400_001)
        density = np.exp(log_density(self.x))
        self.mass = np.concatenate([[0.0], np.cumsum((density[1:] + density[:-1]) / 2)])
        self.mass *= self.x[1] - self.x[0]
        self.total = float(self.mass[-1])
        self.density = density / self.total

    def _expect(self, f: Any) -> float:
        return float(np.trapezoid(f * self.density, self.x))

    def mean(self) -> float:
        return self._expect(self.x)

    def std(self) -> float:
        return math.sqrt(self._expect((self.x - self.mean()) ** 2))

    def ppf(self, p: float) -> float:
        return float(np.interp(p * self.total, self.mass, self.x))

    def isf(self, p: float) -> float:
        return self.ppf(1 - p)


def _hardly_changed() -> Iterator[Problem]:
    """
    A posterior N(0, 1) under Normal(0, s), asked about a Student-t prior of the same scale.

    The weights grow like exp(x²/2s²), of shape 1/s², whatever the target's degrees of freedom;
    they are nearly constant where the draws are.
    """
    for scale, nu in ((2.0, 5), (1.6, 8), (3.0, 3), (1.3, 5)):
        old, new = normal(0, scale), stats.t(nu, 0, scale)

        def log_target(x: Any, old: Any = old, new: Any = new) -> Any:
            return stats.norm.logpdf(x) + new.logpdf(x) - old.logpdf(x)

        target = Product(log_target, -40.0 if scale > 1.5 else -60.0, 40.0 if scale > 1.5 else 60.0)
        ask = _asked(normal(0, 1), sy.Normal(0, scale), sy.StudentT(nu, 0, scale))
        yield Problem(
            "hardly changed",
            f"StudentT({nu}, 0, {scale:g}) over Normal(0, {scale:g})",
            1 / scale**2 < 0.5,
            ask,
            exact_answers(target, normal(0, 1), math.log(target.total)),
        )
