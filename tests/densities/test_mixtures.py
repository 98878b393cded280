"""Mixtures: log densities, slopes, supports, and what is refused."""

from __future__ import annotations

import mpmath as mp
import numpy as np
import pytest
from scipy import stats

import steelyard as sy
from steelyard.errors import ArgumentError, ArgumentTypeError, PriorError, ShapeError

SEED = 20_261_214
NEAR, WIDE = sy.Normal(0.0, 1.0), sy.StudentT(3, 1, 5)


def test_log_density_is_the_log_of_the_weighted_sum() -> None:
    x = np.random.default_rng(SEED).normal(0, 6, size=(30, 4))
    got = sy.Mixture([0.25, 0.75], [NEAR, WIDE]).log_density(x)
    want = np.log(0.25 * stats.norm.pdf(x) + 0.75 * stats.t(3, 1, 5).pdf(x))
    # 1e-12: scipy's densities are good to 1e-13 of themselves.
    np.testing.assert_allclose(got, want, rtol=1e-12, atol=1e-12)


def test_components_far_apart_neither_underflow_nor_overflow() -> None:
    mixture = sy.Mixture([0.5, 0.5], [sy.Normal(0, 1e-3), sy.Normal(0, 1)])
    # At 100 the narrow one is e^(−5e9).
    want = float(mp.log(mp.mpf(1) / 2) - 5000 - mp.log(2 * mp.pi) / 2)
    assert float(mixture.log_density(100.0)) == pytest.approx(want, rel=1e-15)
    np.testing.assert_allclose(mixture.gradient(100.0), -100.0, rtol=1e-15)


def test_a_component_of_weight_zero_changes_nothing() -> None:
    x = np.linspace(-3, 9, 50)
    mixture = sy.Mixture([1, 0], [NEAR, sy.Uniform(2, 3)])
    np.testing.assert_array_equal(mixture.log_density(x), NEAR.log_density(x))
    np.testing.assert_array_equal(mixture.gradient(x), NEAR.gradient(x))
    inside = sy.Mixture([0, 1], [NEAR, sy.Uniform(2, 3)])
    assert [float(v) for v in inside.support()] == [2.0, 3.0]
    assert np.all(inside.sample(200, rng=SEED) > 2)


def test_an_infinite_density_of_a_component_is_kept() -> None:
    mixture = sy.Mixture([0.5, 0.5], [sy.Gamma(0.5, 1), sy.Gamma(2, 1)])
    assert float(mixture.log_density(0.0)) == np.inf
    assert float(mixture.log_density(-1.0)) == -np.inf
    assert np.isnan(mixture.log_density(np.nan))


def test_the_support_is_the_hull() -> None:
    mixture = sy.Mixture([0.5, 0.5], [sy.Uniform([0, 1], [1, 2]), sy.Uniform(3, 4)])
    lower, upper = mixture.support((2,))
    assert lower.tolist() == [0.0, 1.0]
    assert np.broadcast_to(upper, 2).tolist() == [4.0, 4.0]


def test_slopes_are_shares_times_those_of_the_components() -> None:
    x = np.linspace(-4, 8, 9)
    slopes = sy.Mixture([0.25, 0.75], [NEAR, WIDE]).hyper_gradient(x)
    assert list(slopes) == [
        "weights",
        "components[0].mean",
        "components[0].sd",
        "components[1].df",
        "components[1].location",
        "components[1].scale",
    ]
    near, wide = stats.norm.pdf(x), stats.t(3, 1, 5).pdf(x)
    whole = 0.25 * near + 0.75 * wide
    want = np.stack([near, wide], axis=-1) / whole[:, None]
    np.testing.assert_allclose(slopes["weights"], want, rtol=1e-11)
    np.testing.assert_allclose(slopes["components[0].mean"], 0.25 * near / whole * x, rtol=1e-11)


def test_named_weights_are_taken_draw_by_draw() -> None:
    rng = np.random.default_rng(SEED + 1)
    draws = {"w": rng.dirichlet([1, 2], size=20), "mu": rng.normal(size=20)}
    mixture = sy.Mixture("w", [sy.Normal("mu", 1), WIDE])
    assert mixture.names == ("mu", "w")
    value = rng.normal(size=(20, 3))
    got = mixture.log_density(value, draws)
    for n in range(20):
        alone = sy.Mixture(draws["w"][n], [sy.Normal(draws["mu"][n], 1), WIDE])
        np.testing.assert_array_equal(got[n], alone.log_density(value[n]))
    assert mixture.hyper_gradient(value, draws)["weights"].shape == (20, 3, 2)


def test_mixtures_of_vectors_keep_their_axes() -> None:
    vectors = np.random.default_rng(SEED + 2).dirichlet([2, 3, 4], size=6)
    mixture = sy.Mixture([0.5, 0.5], [sy.Dirichlet(1), sy.Dirichlet([2, 3, 4])])
    got = mixture.log_density(vectors)
    each = [sy.Dirichlet(1).log_density(vectors), sy.Dirichlet([2, 3, 4]).log_density(vectors)]
    np.testing.assert_allclose(got, np.logaddexp(*each) - np.log(2), rtol=1e-14, atol=1e-14)
    assert mixture.gradient(vectors).shape == (6, 3)
    slopes = mixture.hyper_gradient(vectors)
    assert slopes["weights"].shape == (6, 2)
    assert slopes["components[1].concentration"].shape == (6, 3)
    assert mixture.sample((5, 3), rng=1).sum(axis=1) == pytest.approx(np.ones(5))


@pytest.mark.parametrize(
    ("weights", "components", "error", "words"),
    [
        (
            [0.5, 0.4],
            [NEAR, WIDE],
            ArgumentError,
            "weights with a sum of one; got a sum that is off",
        ),
        ([1.5, -0.5], [NEAR, WIDE], ArgumentError, "a number from 0 to 1; got 1.5 (2 such values)"),
        ([0.5, 0.3, 0.2], [NEAR, WIDE], ArgumentError, "2 weights along the last axis"),
        (1.0, [NEAR], ArgumentError, "1 weights along the last axis"),
        ([1.0], [], ArgumentError, "one or more distributions of one kind; got none"),
        ([0.5, 0.5], [NEAR, sy.Poisson(1)], ArgumentError, "distributions of one kind; got Normal"),
        ([0.5, 0.5], [NEAR, sy.Dirichlet(1)], ArgumentError, "distributions of one kind"),
        (
            [0.5, 0.5],
            [NEAR, "mu"],
            ArgumentTypeError,
            "components[1]: expected a distribution; got",
        ),
        ([1.0], NEAR, ArgumentTypeError, "components: expected a sequence of distributions; got N"),
    ],
)
def test_bad_mixtures_are_refused(
    weights: object, components: object, error: type, words: str
) -> None:
    with pytest.raises(error, match="Mixture") as caught:
        sy.Mixture(weights, components)
    assert words in str(caught.value)


def test_bad_draws_of_the_weights_are_refused() -> None:
    mixture = sy.Mixture("w", [NEAR, WIDE])
    with pytest.raises(PriorError, match=r"a sum of one; got a sum that is off by 0\.1"):
        mixture.log_density(np.zeros(2), {"w": np.array([[0.5, 0.5], [0.5, 0.4]])})
    with pytest.raises(PriorError, match="'w' that are each a number from 0 to 1"):
        mixture.log_density(np.zeros(2), {"w": np.array([[1.5, -0.5], [0.5, 0.5]])})
    with pytest.raises(ShapeError, match="2 weights along the last axis"):
        mixture.log_density(np.zeros(2), {"w": np.full((2, 3), 1 / 3)})
