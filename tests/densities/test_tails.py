"""The stated tails against the log densities themselves, far out and close to the limits."""

from __future__ import annotations

import numpy as np
import pytest

import steelyard as sy
from steelyard.densities import Distribution
from steelyard.densities.tails import Tail

REGULAR = [
    sy.Normal(1, 2),
    sy.StudentT(4, 1, 2),
    sy.Cauchy(1, 2),
    sy.Laplace(1, 2),
    sy.Logistic(1, 2),
    sy.HalfNormal(2),
    sy.HalfCauchy(2),
    sy.HalfStudentT(3, 2),
    sy.Exponential(2),
    sy.Gamma(2.5, 3),
    sy.Gamma(0.4, 3),
    sy.InverseGamma(2.5, 3),
    sy.Beta(0.4, 3.5),
    sy.Uniform(-1, 2),
    sy.Weibull(0.7, 2),
    sy.Weibull(1.6, 2),
    sy.Weibull(2, 2),
    sy.Weibull(3, 2),
    sy.Pareto(2.5, 3),
    sy.SkewNormal(1, 2, 3),
    sy.SkewNormal(1, 2, -3),
    sy.SkewNormal(1, 2, 0),
    sy.Flat(),
    sy.Truncated(sy.Gamma(2.5, 3), 1),
    sy.Truncated(sy.Normal(0, 1), -1, 3),
    sy.Mixture([0.5, 0.5], [sy.Normal(0, 1), sy.Laplace(0, 1)]),
    sy.Mixture([0.5, 0.5], [sy.Normal(0, 1), sy.Normal(0, 3)]),
    sy.Mixture([1, 0], [sy.Normal(0, 1), sy.Cauchy(0, 3)]),
    sy.Mixture([0.2, 0.8], [sy.Gamma(2, 1), sy.Gamma(0.5, 2)]),
]


def stated(tail: Tail, d: np.ndarray) -> np.ndarray:
    return -tail.speed * d**tail.order + tail.power * np.log(d)


@pytest.mark.parametrize("distribution", REGULAR, ids=str)
@pytest.mark.parametrize("side", [-1, 1], ids=["lower", "upper"])
def test_the_log_density_goes_as_the_tail_says(distribution: Distribution, side: int) -> None:
    tails = distribution.tails()
    tail = tails.lower if side < 0 else tails.upper
    if np.isinf(tail.limit):
        x = side * np.array([1e5, 1e6])
    elif tail.order < 0:
        x = tail.limit - side * np.array([1e-5, 1e-6])
    else:
        x = tail.limit - side * np.array([1e-5, 1e-6]) * max(1.0, abs(float(tail.limit)))
    d = np.abs(x) if np.isinf(tail.limit) else np.abs(x - tail.limit)
    rise = np.diff(distribution.log_density(x))
    # The leading terms: a location adds 1e-5 of them far out, and a factor at a limit 1e-4.
    np.testing.assert_allclose(rise, np.diff(stated(tail, d)), rtol=1e-3, atol=1e-3)


@pytest.mark.parametrize(
    ("distribution", "lower", "upper"),
    [
        (sy.Normal(0, 1), "normal", "normal"),
        (sy.LogNormal(0, 1), "bounded", "between polynomial and exponential"),
        (sy.Gumbel(0, 1), "lighter than normal", "exponential"),
        (sy.Weibull(0.5, 1), "bounded", "between polynomial and exponential"),
        (sy.Weibull(1, 1), "bounded", "exponential"),
        (sy.Weibull(1.5, 1), "bounded", "between exponential and normal"),
        (sy.Weibull(3, 1), "bounded", "lighter than normal"),
        (sy.Poisson(2), "bounded", "between exponential and normal"),
        (sy.Binomial(4, 0.5), "bounded", "bounded"),
        (sy.NegativeBinomial(2, 1), "bounded", "exponential"),
        (sy.Pareto(2, 1), "bounded", "polynomial"),
        (sy.Flat(0), "bounded", "polynomial"),
        (sy.Truncated(sy.Cauchy(0, 1), 0, 4), "bounded", "bounded"),
        (sy.Mixture([0.9, 0.1], [sy.Normal(0, 1), sy.Cauchy(0, 1)]), "polynomial", "polynomial"),
    ],
    ids=str,
)
def test_kinds_in_words(distribution: Distribution, lower: str, upper: str) -> None:
    tails = distribution.tails()
    assert (str(tails.lower.kind), str(tails.upper.kind)) == (lower, upper)


def numbers(tail: Tail) -> tuple[float, float, float]:
    return float(tail.precision), float(tail.rate), float(tail.index)


def test_how_fast_a_tail_falls_is_asked_without_knowing_the_family() -> None:
    inf = np.inf
    assert numbers(sy.Normal(3, 2).tails().upper) == (0.25, inf, inf)
    assert numbers(sy.Laplace(3, 2).tails().lower) == (0.0, 0.5, inf)
    assert numbers(sy.StudentT(4, 3, 2).tails().lower) == (0.0, 0.0, 5.0)
    assert numbers(sy.Flat().tails().upper) == (0.0, 0.0, 0.0)
    assert numbers(sy.LogNormal(0, 1).tails().upper) == (0.0, 0.0, inf)
    assert numbers(sy.Gamma(3, 2).tails().upper) == (0.0, 2.0, inf)
    assert numbers(sy.Gamma(3, 2).tails().lower) == (inf, inf, inf)
    assert float(sy.Gamma(3, 2).tails().lower.power) == 2.0
    assert numbers(sy.Weibull(1.5, 1).tails().upper) == (0.0, inf, inf)
    assert numbers(sy.Poisson(2).tails().upper) == (0.0, inf, inf)
    assert numbers(sy.NegativeBinomial(3, 2).tails().upper)[1] == pytest.approx(np.log(5 / 3))


def test_a_power_of_a_density_falls_that_much_faster() -> None:
    tail = sy.Normal(0, 2).tails().upper.raised(0.5)
    assert numbers(tail) == (0.125, np.inf, np.inf)
    assert float(sy.Gamma(3, 2).tails().lower.raised(2).power) == 4.0


def test_tails_follow_arrays_and_named_hyperparameters() -> None:
    tails = sy.Normal(0, [1.0, 2.0]).tails((2,))
    assert tails.upper.precision.tolist() == [1.0, 0.25]
    draws = {"tau": np.array([1.0, 2.0, 4.0])}
    tails = sy.Normal(0, "tau").tails((3, 5), draws)
    assert tails.lower.precision.tolist() == [[1.0], [0.25], [0.0625]]
    kinds = sy.Weibull([0.5, 1.0, 2.0], 1).tails((3,)).upper.kind.tolist()
    assert kinds == ["between polynomial and exponential", "exponential", "normal"]
    mixed = sy.Mixture([0.5, 0.5], [sy.Uniform([0, 4], 9), sy.Uniform(2, [3, 12])]).tails((2,))
    assert (mixed.lower.limit.tolist(), mixed.upper.limit.tolist()) == ([0, 2], [9, 12])


def test_tails_of_vectors_are_those_of_each_entry() -> None:
    tails = sy.Dirichlet([2, 3, 4]).tails()
    assert tails.lower.power.tolist() == [1, 2, 3]
    assert tails.upper.power.tolist() == [6, 5, 4]
    assert sy.Dirichlet(2).tails((5, 3)).upper.power.tolist() == [3, 3, 3]
    covariance = [[4, 1], [1, 2]]
    tails = sy.MultivariateNormal(0, covariance).tails((7, 2))
    assert tails.lower.precision.tolist() == [0.25, 0.5]
    tails = sy.LKJCorrelation(2).tails((7, 4, 4))
    assert float(np.squeeze(tails.lower.power)) == 2.0
    with pytest.raises(sy.errors.ShapeError, match=r"tails: expected the shape of the value"):
        sy.LKJCorrelation(2).tails()


def test_whether_a_distribution_is_one_of_whole_numbers() -> None:
    discrete = {sy.Poisson(1), sy.Binomial(2, 0.5), sy.NegativeBinomial(1, 1)}
    assert all(d.is_discrete for d in discrete)
    assert sy.Truncated(sy.Poisson(1), 1).is_discrete
    assert not any(d.is_discrete for d in REGULAR)
