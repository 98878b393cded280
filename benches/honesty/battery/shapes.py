"""Gamma, beta, skewed, mixed and discrete bases; supports that shrink and grow."""

from __future__ import annotations

from collections.abc import Iterator
from typing import Any

import numpy as np
from scipy import optimize, stats

import steelyard as sy

from .problem import Array, Exact, Problem, exact_answers, normal, one_dimension, weighed


def problems() -> Iterator[Problem]:
    """All of them."""
    yield from _gammas()
    yield from _betas()
    yield from _skewed()
    yield from _mixtures()
    yield from _discrete()
    yield from _supports()


def _gammas() -> Iterator[Problem]:
    # Gamma(a', b') over Gamma(a, b): shape of the weights max(1 − a'/a, 1 − b'/b), bounded at 0.
    base = stats.gamma(3)
    for shape, rate in (
        (4, 1),
        (5, 1.3),
        (2, 1),
        (1.6, 1),
        (1.2, 1),
        (3, 0.8),
        (3, 0.6),
        (3, 0.45),
        (3, 1.5),
    ):
        finite = max(1 - shape / 3, 1 - rate) < 0.5
        target = stats.gamma(shape, scale=1 / rate)
        yield one_dimension("gamma", f"({shape}, {rate}) over (3, 1)", base, target, finite=finite)


def _betas() -> Iterator[Problem]:
    # Beta(a', b') over Beta(a, b): shape of the weights max(1 − a'/a, 1 − b'/b).
    base = stats.beta(2, 5)
    for a, b in ((3, 5), (1.4, 5), (0.9, 5), (4, 4), (2, 3), (2, 2.2), (2, 8)):
        finite = max(1 - a / 2, 1 - b / 5) < 0.5
        yield one_dimension(
            "beta", f"({a}, {b}) over (2, 5)", base, stats.beta(a, b), finite=finite
        )


def _skewed() -> Iterator[Problem]:
    # Log-normal moved: weights are powers of a log-normal, with all moments. Skew normal over
    # normal: bounded by 2. Gumbel moved by m: the weights are exp(m) at most below, and tend to
    # exp(m) above.
    base = stats.lognorm(0.5)
    for by in (0.2, 0.5):
        target = stats.lognorm(0.5, scale=float(np.exp(by)))
        yield one_dimension("skewed", f"log-normal moved by {by}", base, target, finite=True)
    for skewness in (1, -4):
        yield one_dimension(
            "skewed", f"skew normal {skewness}", normal(0, 1), stats.skewnorm(skewness), finite=True
        )
    yield one_dimension(
        "skewed", "Gumbel moved by 0.7", stats.gumbel_r(), stats.gumbel_r(0.7), finite=True
    )
    yield one_dimension(
        "skewed", "exponential stretched by 1.5", stats.expon(), stats.expon(scale=1.5), finite=True
    )


class Mixture:
    """A mixture of two normals with the few methods of a frozen distribution that are asked."""

    def __init__(self, share: float, first: tuple[float, float], second: tuple[float, float]):
        self.shares = np.array([1 - share, share])
        self.means, self.sds = np.array([first, second]).T

    def logpdf(self, x: Array) -> Array:
        parts = stats.norm.pdf(x[..., None], self.means, self.sds) * self.shares
        return np.asarray(np.log(parts.sum(axis=-1)))

    def rvs(self, size: tuple[int, ...], random_state: np.random.Generator) -> Array:
        which = (random_state.random(size) < self.shares[1]).astype(int)
        return self.means[which] + self.sds[which] * random_state.normal(size=size)

    def mean(self) -> float:
        return float(self.shares @ self.means)

    def std(self) -> float:
        second = self.shares @ (self.sds**2 + self.means**2)
        return float(np.sqrt(second - self.mean() ** 2))

    def ppf(self, p: float) -> float:
        def gap(x: float) -> float:
            return float(self.shares @ stats.norm.cdf(x, self.means, self.sds) - p)

        return float(optimize.brentq(gap, -50, 50, xtol=1e-12))

    def isf(self, p: float) -> float:
        return self.ppf(1 - p)


def _mixtures() -> Iterator[Problem]:
    # Components shared by both sides: weights bounded by the ratio of the shares. A component that
    # the base lacks, N(m, s²) over N(0, 1), has weights of finite variance for s² < 2.
    low, high = (-2.0, 1.0), (2.0, 0.7)
    for name, before, after in (
        ("mode lost", 0.5, 0.02),
        ("mode kept", 0.3, 0.5),
        ("mode gained", 0.1, 0.6),
        ("rare mode gained", 0.01, 0.3),
    ):
        base, target = Mixture(before, low, high), Mixture(after, low, high)
        yield one_dimension("mixture", name, base, target, finite=True)
    for at in (2.0, 3.0, 4.0):
        target = Mixture(0.3, (0.0, 1.0), (at, 0.5))
        yield one_dimension("mode from nothing", f"at {at:g} sd", normal(0, 1), target, finite=True)


def _discrete() -> Iterator[Problem]:
    # Poisson: weights (m'/m)^x have all moments. Binomial: bounded.
    for name, base, target in (
        ("Poisson 5 over 4", stats.poisson(4), stats.poisson(5)),
        ("Poisson 3 over 4", stats.poisson(4), stats.poisson(3)),
        ("binomial 0.4 over 0.3", stats.binom(20, 0.3), stats.binom(20, 0.4)),
    ):
        ask = weighed(
            lambda rng, base=base: base.rvs(size=(4, 1000), random_state=rng).astype(float),
            lambda x, base=base, target=target: target.logpmf(x) - base.logpmf(x),
        )
        yield Problem("discrete", name, True, ask, _of_whole_numbers(target, base))


def _of_whole_numbers(target: Any, base: Any) -> dict[str, Exact]:
    """
    As `exact_answers`, with what interpolated quantiles of whole numbers tend to.

    Equal values share one step of the distribution: at a value it stands at ``P(X < x) + P(X =
    x)/2``, and in between it is a straight line.
    """
    exact = exact_answers(target, base, 0.0)
    x = np.arange(0, int(target.isf(1e-15)) + 2)
    middle = target.cdf(x) - target.pmf(x) / 2
    for p in (0.05, 0.95):
        old = exact[f"q{p}"]
        exact[f"q{p}"] = Exact(old.estimate, float(np.interp(p, middle, x)), old.scale)
    limit = int(target.isf(1e-3))
    p = float(target.sf(limit))
    exact["tail"] = Exact(lambda a: a.prob(f"x > {limit}"), p, float(np.sqrt(p * (1 - p))))
    return exact


def _supports() -> Iterator[Problem]:
    # Shrinking: weights 0 and 1. Growing: no draw can lie in the new part, and no weight says so.
    whole, half = normal(0, 1), stats.halfnorm()

    def asked(base: Any, old: Any, new: Any) -> Any:
        def ask(rng: np.random.Generator) -> Any:
            x = base.rvs(size=(4, 1000), random_state=rng)
            return sy.Fit({"x": x}, prior={"x": old}).reweigh(sy.swap_prior(x=new))

        return ask

    wide, positive = sy.Flat(-10, 10), sy.Flat(0, 10)
    yield Problem(
        "support shrinks",
        "half of it",
        True,
        asked(whole, wide, positive),
        exact_answers(half, whole, 0.0),
    )
    cut = stats.truncnorm(-1, np.inf)
    yield Problem(
        "support shrinks",
        "a sixth lost",
        True,
        asked(whole, wide, sy.Flat(-1, 10)),
        exact_answers(cut, whole, float(np.log(stats.norm.sf(-1) * 20 / 11))),
    )
    yield Problem(
        "support grows", "twice", True, asked(half, positive, wide), exact_answers(whole, half, 0.0)
    )
    yield Problem(
        "support grows",
        "by a sixth",
        True,
        asked(cut, sy.Flat(-1, 10), wide),
        exact_answers(whole, cut, float(np.log(11 / 20 / stats.norm.sf(-1)))),
    )
