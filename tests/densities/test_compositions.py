"""Truncated mixtures, mixtures of truncations, and deeper: mass, support and slopes."""

from __future__ import annotations

from collections.abc import Callable

import numpy as np
import pytest

import steelyard as sy
from steelyard.densities import Distribution

NODES = np.polynomial.legendre.leggauss(400)


def integral(distribution: Distribution, low: float, high: float) -> float:
    nodes, weights = NODES
    x = (low + high) / 2 + (high - low) / 2 * nodes
    return float(np.exp(distribution.log_density(x)) @ weights * (high - low) / 2)


NEAR, WIDE = sy.Normal(0.3, 0.4), sy.StudentT(3, 1, 2)
COMPOSED: list[tuple[Distribution, float, float, float]] = [
    (sy.Truncated(sy.Mixture([0.3, 0.7], [NEAR, WIDE]), -1, 2.5), -1, 2.5, 0.4),
    (sy.Mixture([0.3, 0.7], [sy.Truncated(NEAR, 0, 2), sy.Truncated(WIDE, 0, 2)]), 0, 2, 0.4),
    (sy.Truncated(sy.Truncated(WIDE, -1, 3), 0, 5), 0, 3, 1.4),
    (
        sy.Truncated(
            sy.Mixture([0.2, 0.8], [sy.Truncated(sy.Gamma(2, 1), 0.5, 9), sy.Uniform(0, 3)]), 1, 2
        ),
        1,
        2,
        1.3,
    ),
    (sy.Mixture([0.5, 0.5], [sy.Mixture([0.1, 0.9], [NEAR, WIDE]), NEAR]), -40, 40, 0.4),
    (sy.Truncated(sy.Uniform(0, 3), 1, 5), 1, 3, 1.3),
    (sy.Truncated(sy.Flat(), -1, 1), -1, 1, 0.0),
    (sy.Truncated(sy.Flat(0), -1, 2), 0, 2, 1.0),
]


@pytest.mark.parametrize(("distribution", "low", "high", "value"), COMPOSED, ids=str)
def test_compositions_integrate_to_one_and_vanish_outside(
    distribution: Distribution, low: float, high: float, value: float
) -> None:
    total = integral(distribution, low, high)
    # 1e-12 by 400 Gauss nodes; 2e-4 for the heavy tails beyond ±40 in the one untruncated case.
    assert total == pytest.approx(1, abs=2e-4 if high == 40 else 1e-12)
    if high < 40:
        assert np.all(np.isinf(distribution.log_density([low - 1e-9, high + 1e-9])))
        assert [float(v) for v in distribution.support()] == [low, high]


def perturbed(
    make: Callable[..., Distribution], at: list[float], index: int, step: float, value: float
) -> float:
    moved = [v + step * (i == index) for i, v in enumerate(at)]
    return float(make(*moved).log_density(value))


MAKERS: list[tuple[Callable[..., Distribution], list[str], list[float], float]] = [
    (
        lambda m, s, df, low, high: sy.Truncated(
            sy.Mixture([0.3, 0.7], [sy.Normal(m, s), sy.StudentT(df, 1, 2)]), low, high
        ),
        ["d.components[0].mean", "d.components[0].sd", "d.components[1].df", "lower", "upper"],
        [0.3, 0.4, 3.0, -1.0, 2.5],
        0.4,
    ),
    (
        lambda m, s, low, a, b: sy.Mixture(
            [0.3, 0.7],
            [sy.Truncated(sy.Normal(m, s), low, 2), sy.Truncated(sy.Gamma(a, b), 0.1, 4)],
        ),
        [
            "components[0].d.mean",
            "components[0].d.sd",
            "components[0].lower",
            "components[1].d.shape",
            "components[1].d.rate",
        ],
        [0.3, 0.4, -0.2, 2.0, 1.5],
        0.9,
    ),
    (
        lambda df, s, low, high, outer: sy.Truncated(
            sy.Truncated(sy.StudentT(df, 1, s), low, high), outer, 2.0
        ),
        ["d.d.df", "d.d.scale", "d.lower", "d.upper", "lower"],
        [3.0, 2.0, -1.0, 3.0, 0.2],
        1.4,
    ),
    (
        lambda a, b, low, high, outer: sy.Truncated(
            sy.Mixture([0.4, 0.6], [sy.Truncated(sy.Gamma(a, b), low, high), sy.Uniform(0, 3)]),
            outer,
            2.0,
        ),
        [
            "d.components[0].d.shape",
            "d.components[0].d.rate",
            "d.components[0].lower",
            "d.components[0].upper",
            "lower",
        ],
        [2.0, 1.0, 0.5, 9.0, 1.0],
        1.3,
    ),
    (
        lambda rate, m, d: sy.Truncated(
            sy.Mixture([0.4, 0.6], [sy.Poisson(rate), sy.NegativeBinomial(m, d)]), 1, 9
        ),
        ["d.components[0].rate", "d.components[1].mean", "d.components[1].dispersion"],
        [2.0, 3.0, 1.5],
        4.0,
    ),
    (
        lambda n, p: sy.Truncated(sy.Binomial(9, p), 1, 7),
        ["d.n", "d.p"],
        [9.0, 0.4],
        4.0,
    ),
]


@pytest.mark.parametrize(("make", "names", "at", "value"), MAKERS)
def test_slopes_of_compositions_are_derivatives(
    make: Callable[..., Distribution], names: list[str], at: list[float], value: float
) -> None:
    slopes = make(*at).hyper_gradient(value)
    for index, name in enumerate(names):
        if name == "d.n":
            continue
        ends = [perturbed(make, at, index, step, value) for step in (1e-5, -1e-5)]
        # Differences over 2e-5 of numbers good to 1e-15 have an error of 1e-10; their curvature
        # adds 1e-10 of the third derivative, here below 100.
        assert float(slopes[name]) == pytest.approx((ends[0] - ends[1]) / 2e-5, abs=2e-8), name


def test_slopes_in_the_weights_of_a_truncated_mixture_are_derivatives() -> None:
    def log_density(first: float, second: float) -> float:
        near = np.logaddexp(
            np.log(first) + NEAR.log_density(0.4), np.log(second) + WIDE.log_density(0.4)
        )
        held = [
            -float(sy.Truncated(d, -1, 2.5).log_density(0.4)) + float(d.log_density(0.4))
            for d in (NEAR, WIDE)
        ]
        return float(near - np.logaddexp(np.log(first) + held[0], np.log(second) + held[1]))

    got = sy.Truncated(sy.Mixture([0.3, 0.7], [NEAR, WIDE]), -1, 2.5).hyper_gradient(0.4)
    want = [
        (log_density(0.3 + 1e-6, 0.7) - log_density(0.3 - 1e-6, 0.7)) / 2e-6,
        (log_density(0.3, 0.7 + 1e-6) - log_density(0.3, 0.7 - 1e-6)) / 2e-6,
    ]
    np.testing.assert_allclose(got["d.weights"], want, atol=1e-8)  # 1e-15/1e-6, curvature 1e-12
