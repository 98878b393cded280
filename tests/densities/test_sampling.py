"""Random draws against the distribution functions, with stated seeds and false-alarm rates."""

from __future__ import annotations

import numpy as np
import pytest
from scipy import stats

import steelyard as sy
from densities.reference import CASES, Case, draw
from steelyard.densities import Distribution
from steelyard.densities.cumulative import Cumulative, log_tails_at

SEED = 20_261_216
COUNT = 4000
# Each test below rejects a true generator once in 1e5 seeds; there are some fifty of them.
FALSE_ALARM = 1e-5
EACH = pytest.mark.parametrize("case", CASES, ids=lambda case: case.make.__name__)


def cdf(distribution: Distribution, x: np.ndarray) -> np.ndarray:
    """The package's distribution function, itself tested against mpmath with the truncations."""
    assert isinstance(distribution, Cumulative)
    with np.errstate(all="ignore"):
        return np.exp(log_tails_at(distribution, x, tuple(distribution.resolve(())))[0])


def chi_square(distribution: Distribution, draws: np.ndarray) -> float:
    """p value of the counts of each whole number, pooled where fewer than 10 are expected."""
    whole = np.arange(draws.max() + 1)
    expected = draws.size * np.exp(distribution.log_density(whole))
    counts = np.bincount(draws.astype(int), minlength=whole.size)
    often = expected >= 10
    seen = np.append(counts[often], draws.size - counts[often].sum())
    wanted = np.append(expected[often], draws.size - expected[often].sum())
    if wanted[-1] < 5:
        seen, wanted = seen[:-1], wanted[:-1] * seen[:-1].sum() / wanted[:-1].sum()
    return float(stats.chisquare(seen, wanted).pvalue)


def p_value(distribution: Distribution, draws: np.ndarray) -> float:
    if distribution.is_discrete:
        return chi_square(distribution, draws)
    return float(stats.kstest(draws, lambda x: cdf(distribution, x)).pvalue)


@EACH
def test_draws_follow_the_distribution(case: Case) -> None:
    for index, (hyper, _) in enumerate(draw(case, SEED, 2)):
        distribution = case.make(*hyper)
        draws = distribution.sample(COUNT, rng=SEED + index)
        assert draws.shape == (COUNT,)
        assert np.all(np.isfinite(distribution.log_density(draws)))
        assert p_value(distribution, draws) > FALSE_ALARM, distribution


TRUNCATED = [
    sy.Truncated(sy.Normal(0, 1), 0.5, 2),
    sy.Truncated(sy.Normal(0, 1), 8),
    sy.Truncated(sy.Normal(0, 1), upper=-9),
    sy.Truncated(sy.StudentT(2, 0, 1), 100),
    sy.Truncated(sy.Gamma(0.2, 1), 0, 1e-6),
    sy.Truncated(sy.Gamma(0.2, 1), 5),
    sy.Truncated(sy.Beta(2, 9), 0.7, 0.9),
    sy.Truncated(sy.Cauchy(0, 1), -1, 40),
    sy.Truncated(sy.Poisson(4), 1),
    sy.Truncated(sy.Poisson(4), 12),
    sy.Truncated(sy.Binomial(30, 0.2), 15, 20),
    sy.Truncated(sy.Flat(), 2, 5),
    sy.Truncated(sy.Mixture([0.7, 0.3], [sy.Normal(0, 1), sy.Normal(5, 2)]), -1, 4),
    sy.Truncated(sy.Mixture([0.99, 0.01], [sy.Normal(0, 1), sy.Normal(50, 2)]), 6, 60),
    sy.Mixture([0.7, 0.3], [sy.Truncated(sy.Normal(0, 1), 0), sy.Gamma(3, 1)]),
    sy.Mixture([0.7, 0.3], [sy.Poisson(2), sy.NegativeBinomial(9, 2)]),
    sy.Truncated(sy.Truncated(sy.Laplace(0, 1), -1, 3), 0),
]


@pytest.mark.parametrize("distribution", TRUNCATED, ids=str)
def test_draws_of_compositions_follow_them(distribution: Distribution) -> None:
    draws = distribution.sample(COUNT, rng=SEED)
    assert np.all(np.isfinite(distribution.log_density(draws)))
    assert p_value(distribution, draws) > FALSE_ALARM


def test_an_improper_mixture_between_limits_is_drawn_by_its_mass() -> None:
    distribution = sy.Truncated(sy.Mixture([0.5, 0.5], [sy.Flat(), sy.Normal(1, 0.1)]), 0, 4)
    draws = distribution.sample(COUNT, rng=SEED)
    # Mass ½·4 of the flat part, ½ of the normal one: 1/5 of the draws belong to the latter, and
    # 0.997/5 + 0.15·4/5 lie within three sds of its mean.
    share = 0.9973 / 5 + 0.15 * 4 / 5
    p = stats.binomtest(int((np.abs(draws - 1) < 0.3).sum()), COUNT, share).pvalue
    assert p > FALSE_ALARM


def test_each_share_of_a_dirichlet_is_beta() -> None:
    alpha = np.array([0.05, 2.0, 7.0])
    draws = sy.Dirichlet(alpha).sample((COUNT, 3), rng=SEED)
    np.testing.assert_allclose(draws.sum(axis=1), 1, rtol=1e-14)
    for k in range(3):
        p = stats.kstest(draws[:, k], stats.beta(alpha[k], alpha.sum() - alpha[k]).cdf).pvalue
        assert p > FALSE_ALARM
    tiny = sy.Dirichlet([1e-4, 1e-4]).sample((1000, 2), rng=SEED)
    assert np.all(np.isfinite(tiny))


def test_multivariate_normals_have_their_mahalanobis_distances() -> None:
    covariance = np.array([[2.0, 0.6], [0.6, 0.5]])
    draws = sy.MultivariateNormal([1, -1], covariance).sample((COUNT, 2), rng=SEED)
    off = draws - [1, -1]
    squares = np.einsum("ni,ij,nj->n", off, np.linalg.inv(covariance), off)
    assert stats.kstest(squares, stats.chi2(2).cdf).pvalue > FALSE_ALARM
    for k in range(2):
        p = stats.kstest(off[:, k], stats.norm(0, np.sqrt(covariance[k, k])).cdf).pvalue
        assert p > FALSE_ALARM


@pytest.mark.parametrize(("eta", "size"), [(1.0, 3), (2.5, 4), (0.5, 5)])
def test_each_correlation_of_an_lkj_matrix_is_beta(eta: float, size: int) -> None:
    draws = sy.LKJCorrelation(eta).sample((COUNT, size, size), rng=SEED)
    assert np.all(np.isfinite(sy.LKJCorrelation(eta).log_density(draws)))
    shape = eta - 1 + size / 2
    for i, j in [(1, 0), (size - 1, 0), (size - 1, size - 2)]:
        p = stats.kstest((draws[:, i, j] + 1) / 2, stats.beta(shape, shape).cdf).pvalue
        assert p > FALSE_ALARM, (i, j)


def test_the_determinant_of_an_lkj_matrix_is_a_product_of_betas() -> None:
    # det R = Π (1 − p²) over independent partial correlations, each a beta variable.
    draws = sy.LKJCorrelation(2.0).sample((COUNT, 3, 3), rng=SEED)
    rng = np.random.default_rng(SEED + 1)
    product = np.ones(COUNT)
    for a in (2.5, 2.5, 2.0):
        product *= 1 - (2 * rng.beta(a, a, size=COUNT) - 1) ** 2
    assert stats.ks_2samp(np.linalg.det(draws), product).pvalue > FALSE_ALARM


def test_seeds_replay_and_generators_advance() -> None:
    distribution = sy.Truncated(sy.Normal("mu", 1), 0)
    draws = {"mu": np.zeros(50)}
    one = distribution.sample((50, 2), rng=7, draws=draws)
    np.testing.assert_array_equal(one, distribution.sample((50, 2), rng=7, draws=draws))
    rng = np.random.default_rng(7)
    np.testing.assert_array_equal(one, distribution.sample((50, 2), rng=rng, draws=draws))
    assert not np.array_equal(one, distribution.sample((50, 2), rng=rng, draws=draws))


def test_named_hyperparameters_shift_the_draws_they_belong_to() -> None:
    draws = {"mu": np.array([0.0, 1e6]), "tau": np.array([1.0, 2.0])}
    got = sy.Normal("mu", "tau").sample((2, 3000), rng=SEED, draws=draws)
    for n in range(2):
        p = stats.kstest(got[n], stats.norm(draws["mu"][n], draws["tau"][n]).cdf).pvalue
        assert p > FALSE_ALARM


def test_one_number_is_drawn_without_a_size() -> None:
    assert sy.Normal(0, 1).sample(rng=1).shape == ()
    assert sy.Normal([0, 9], 1).sample((4, 2), rng=1).shape == (4, 2)
    with pytest.raises(TypeError, match="positional"):
        sy.Normal(0, 1).sample(3, 1)  # type: ignore[misc]
