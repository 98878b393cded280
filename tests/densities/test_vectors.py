"""Dirichlet, multivariate normal and LKJ: values, slopes, shapes, and what is refused."""

from __future__ import annotations

import mpmath as mp
import numpy as np
import pytest
from scipy import stats

import steelyard as sy
from densities.reference import exact
from steelyard.densities import Distribution
from steelyard.errors import ArgumentError, PriorError, ShapeError

SEED = 20_261_215
COVARIANCE = np.array([[2.0, 0.6, -0.3], [0.6, 1.0, 0.2], [-0.3, 0.2, 0.5]])
MEAN = np.array([0.5, -1.0, 2.0])


def correlations(rng: np.random.Generator, size: int, count: int) -> np.ndarray:
    scatter = rng.normal(size=(count, size, size + 3))
    covariance = scatter @ scatter.swapaxes(1, 2)
    sd = np.sqrt(np.diagonal(covariance, axis1=1, axis2=2))
    return covariance / sd[:, :, None] / sd[:, None, :]


def test_dirichlet_agrees_with_sixty_digit_arithmetic() -> None:
    rng = np.random.default_rng(SEED)
    for _ in range(60):
        alpha = np.exp(rng.normal(0, 2, size=4))
        x = rng.dirichlet(np.ones(4))
        terms = [(exact(a) - 1) * mp.log(exact(v)) for a, v in zip(alpha, x, strict=True)]
        constant = sum(mp.loggamma(exact(a)) for a in alpha) - mp.loggamma(sum(map(exact, alpha)))
        want = float(sum(terms) - constant)
        # 1e-12 of the terms, which cancel around the mode.
        size = max(1.0, abs(float(constant)), *(abs(float(t)) for t in terms))
        assert float(sy.Dirichlet(alpha).log_density(x)) == pytest.approx(want, abs=1e-12 * size)


def test_dirichlet_agrees_with_beta_and_scipy() -> None:
    x = np.linspace(0.01, 0.99, 9)
    pairs = np.stack([x, 1 - x], axis=-1)
    got = sy.Dirichlet([2.5, 0.7]).log_density(pairs)
    np.testing.assert_allclose(got, sy.Beta(2.5, 0.7).log_density(x), rtol=1e-12, atol=1e-12)
    three = np.random.default_rng(SEED + 1).dirichlet([1, 2, 3], size=5)
    want = [stats.dirichlet([1, 2, 3]).logpdf(v) for v in three]
    np.testing.assert_allclose(sy.Dirichlet([1, 2, 3]).log_density(three), want, rtol=1e-10)


def test_one_concentration_stands_for_all() -> None:
    x = np.random.default_rng(SEED + 2).dirichlet([1, 2, 3], size=(5, 2))
    shared, spelt = sy.Dirichlet(1.7), sy.Dirichlet([1.7, 1.7, 1.7])
    np.testing.assert_array_equal(shared.log_density(x), spelt.log_density(x))
    slope = shared.hyper_gradient(x)["concentration"]
    step = 1e-6
    ends = [sy.Dirichlet(1.7 + s).log_density(x) for s in (step, -step)]
    # 1e-9 by differences of numbers good to 1e-15 over 2e-6.
    np.testing.assert_allclose(slope.sum(axis=-1), (ends[0] - ends[1]) / (2 * step), atol=1e-8)


def test_off_the_simplex_the_density_is_zero() -> None:
    flat = sy.Dirichlet(1)
    assert np.all(np.isinf(flat.log_density([[0.5, 0.6], [1.2, -0.2], [0.5, 0.49]])))
    assert float(flat.log_density(np.array([0.2, 0.3, 0.5], dtype=np.float32))) == pytest.approx(
        np.log(2)
    )
    assert np.isnan(flat.log_density([np.nan, 1.0]))
    assert float(sy.Dirichlet([1, 2]).log_density([0.0, 1.0])) == pytest.approx(np.log(2))
    assert float(sy.Dirichlet([0.5, 2]).log_density([0.0, 1.0])) == np.inf
    assert float(sy.Dirichlet([3, 2]).log_density([0.0, 1.0])) == -np.inf


def test_multivariate_normal_agrees_with_scipy() -> None:
    x = np.random.default_rng(SEED + 3).normal(size=(7, 4, 3)) * 3
    got = sy.MultivariateNormal(MEAN, COVARIANCE).log_density(x)
    # 1e-12: both solve the same 3×3 system, condition number 8.
    want = stats.multivariate_normal(MEAN, COVARIANCE).logpdf(x)
    np.testing.assert_allclose(got, want, rtol=1e-12, atol=1e-12)
    one = sy.MultivariateNormal([1.0], [[4.0]]).log_density([[0.3]])
    np.testing.assert_allclose(one, sy.Normal(1, 2).log_density([0.3]), rtol=1e-14)


def test_named_mean_and_covariance_are_taken_draw_by_draw() -> None:
    rng = np.random.default_rng(SEED + 4)
    scatter = rng.normal(size=(12, 3, 5))
    draws = {"mu": rng.normal(size=(12, 3)), "Sigma": scatter @ scatter.swapaxes(1, 2)}
    joint = sy.MultivariateNormal("mu", "Sigma")
    for shape in ((12, 3), (12, 2, 3)):
        x = rng.normal(size=shape)
        got, slopes = joint.log_density(x, draws), joint.hyper_gradient(x, draws)
        assert got.shape == shape[:-1]
        assert slopes["mean"].shape == shape
        assert slopes["covariance"].shape == (*shape, 3)
        for n in range(12):
            alone = sy.MultivariateNormal(draws["mu"][n], draws["Sigma"][n])
            np.testing.assert_allclose(got[n], alone.log_density(x[n]), rtol=1e-11, atol=1e-11)


def test_lkj_of_two_is_a_beta_and_of_three_integrates_to_one() -> None:
    r = np.linspace(-0.95, 0.95, 9)
    matrices = np.array([[[1, v], [v, 1]] for v in r])
    got = sy.LKJCorrelation(2.3).log_density(matrices)
    want = sy.Beta(2.3, 2.3).log_density((r + 1) / 2) - np.log(2)
    np.testing.assert_allclose(got, want, rtol=1e-12, atol=1e-12)
    grid = np.linspace(-1, 1, 81)[1:-1]
    a, b, c = np.meshgrid(grid, grid, grid, indexing="ij")
    three = np.stack([np.ones_like(a), a, b, a, np.ones_like(a), c, b, c, np.ones_like(a)], axis=-1)
    density = np.exp(sy.LKJCorrelation(3.0).log_density(three.reshape(*a.shape, 3, 3)))
    # The trapezium rule on a density that falls to 0 like a square at its edge: 1e-3.
    assert density.sum() * (grid[1] - grid[0]) ** 3 == pytest.approx(1, abs=2e-3)


def test_uniform_lkj_is_one_over_the_volume_of_correlation_matrices() -> None:
    volume = np.exp(-float(sy.LKJCorrelation(1).log_density(np.eye(3))))
    assert volume == pytest.approx(np.pi**2 / 2, rel=1e-14)
    # Of four rows: the share of a cube of six correlations that is positive definite. Four standard
    # errors, so a false alarm once in 16,000 seeds.
    rng, count = np.random.default_rng(SEED + 8), 100_000
    matrices = np.tile(np.eye(4), (count, 1, 1))
    rows, columns = np.tril_indices(4, -1)
    matrices[:, rows, columns] = rng.uniform(-1, 1, size=(count, 6))
    share = (np.linalg.eigvalsh(matrices)[:, 0] > 0).mean()
    volume = np.exp(-float(sy.LKJCorrelation(1).log_density(np.eye(4))))
    error = 64 * np.sqrt(share * (1 - share) / count)
    assert volume == pytest.approx(64 * share, abs=4 * error)


def test_what_is_no_correlation_matrix_has_no_density() -> None:
    bad = [
        [[1, 1.2], [1.2, 1]],
        [[1, 1], [1, 1]],
        [[1, 0.5], [0.4, 1]],
        [[1.1, 0.5], [0.5, 1]],
        [[-1, 0], [0, -1]],
    ]
    assert np.all(np.isinf(sy.LKJCorrelation(1).log_density(bad)))
    indefinite = np.array([[1, 0.9, -0.9], [0.9, 1, 0.9], [-0.9, 0.9, 1]])
    assert float(sy.LKJCorrelation(1).log_density(indefinite)) == -np.inf
    assert np.isnan(sy.LKJCorrelation(2).log_density([[1, np.nan], [np.nan, 1]]))
    assert np.isnan(sy.LKJCorrelation(2).gradient(indefinite)).all()


def vector_cases() -> list[tuple[Distribution, np.ndarray]]:
    rng = np.random.default_rng(SEED + 5)
    return [
        (sy.Dirichlet([2.0, 0.5, 3.0]), rng.dirichlet([1, 1, 1], size=4)),
        (sy.MultivariateNormal(MEAN, COVARIANCE), rng.normal(size=(4, 3))),
        (sy.LKJCorrelation(2.5), correlations(rng, 3, 4)),
    ]


@pytest.mark.parametrize(("distribution", "x"), vector_cases(), ids=lambda v: str(v)[:12])
def test_gradients_in_the_value_are_derivatives(distribution: Distribution, x: np.ndarray) -> None:
    got, step = distribution.gradient(x), 1e-7
    axes = tuple(range(1, x.ndim))
    rng = np.random.default_rng(SEED + 6)
    for _ in range(5):
        # Along directions that keep the tie between entries: a sum, symmetry, a unit diagonal.
        way = rng.normal(size=x.shape[1:])
        if isinstance(distribution, sy.Dirichlet):
            way -= way.mean()
        if isinstance(distribution, sy.LKJCorrelation):
            way = np.tril(way, -1)
            way = way + way.T
        ends = [distribution.log_density(x + s * way) for s in (step, -step)]
        want = (ends[0] - ends[1]) / (2 * step)
        # Differences of numbers good to 1e-15 over 2e-7, and their curvature: 1e-6 of the size.
        np.testing.assert_allclose((got * way).sum(axis=axes), want, rtol=1e-6, atol=1e-6)


def test_slopes_in_the_hyperparameters_are_derivatives() -> None:
    (dirichlet, x), (normal, y), (lkj, z) = vector_cases()
    step = 1e-6
    for index in range(3):
        way = np.eye(3)[index] * step
        ends = [sy.Dirichlet(np.array([2.0, 0.5, 3.0]) + s * way).log_density(x) for s in (1, -1)]
        got = dirichlet.hyper_gradient(x)["concentration"][:, index]
        np.testing.assert_allclose(got, (ends[0] - ends[1]) / (2 * step), atol=1e-7)
        ends = [sy.MultivariateNormal(MEAN + s * way, COVARIANCE).log_density(y) for s in (1, -1)]
        got = normal.hyper_gradient(y)["mean"][:, index]
        np.testing.assert_allclose(got, (ends[0] - ends[1]) / (2 * step), atol=1e-7)
        for other in range(index):
            pair = np.zeros((3, 3))
            pair[index, other] = pair[other, index] = step
            ends = [
                sy.MultivariateNormal(MEAN, COVARIANCE + s * pair).log_density(y) for s in (1, -1)
            ]
            both = normal.hyper_gradient(y)["covariance"]
            got = both[:, index, other] + both[:, other, index]
            np.testing.assert_allclose(got, (ends[0] - ends[1]) / (2 * step), rtol=1e-6, atol=1e-6)
    ends = [sy.LKJCorrelation(2.5 + s * step).log_density(z) for s in (1, -1)]
    got = lkj.hyper_gradient(z)["eta"]
    np.testing.assert_allclose(got, (ends[0] - ends[1]) / (2 * step), atol=1e-7)


def test_named_concentration_and_eta() -> None:
    rng = np.random.default_rng(SEED + 7)
    draws = {"alpha": np.exp(rng.normal(size=(6, 3))), "eta": np.exp(rng.normal(size=6))}
    x, z = rng.dirichlet([1, 1, 1], size=(6, 2)), correlations(rng, 4, 6)
    got = sy.Dirichlet("alpha").log_density(x, draws)
    lkj = sy.LKJCorrelation("eta").log_density(z, draws)
    assert got.shape == (6, 2)
    for n in range(6):
        np.testing.assert_allclose(
            got[n], sy.Dirichlet(draws["alpha"][n]).log_density(x[n]), rtol=1e-13, atol=1e-13
        )
        alone = float(sy.LKJCorrelation(draws["eta"][n]).log_density(z[n]))
        assert lkj[n] == pytest.approx(alone, rel=1e-13, abs=1e-13)


@pytest.mark.parametrize(
    ("covariance", "words"),
    [
        ([[1, 0.5], [0.4, 1]], "entries across the diagonal that differ by 0.1"),
        ([[1, 2], [2, 1]], "a smallest eigenvalue of -1"),
        ([[0.0]], "a smallest eigenvalue of 0"),
        ([1.0, 2.0], "shape (2,)"),
        ([[1.0, 0.0]], "shape (1, 2)"),
    ],
)
def test_bad_covariances_are_refused(covariance: object, words: str) -> None:
    with pytest.raises(ArgumentError, match="covariance: expected a symmetric positive") as caught:
        sy.MultivariateNormal(0, covariance)
    assert words in str(caught.value)


def test_bad_draws_and_shapes_are_refused() -> None:
    with pytest.raises(PriorError, match="a symmetric positive definite matrix"):
        sy.MultivariateNormal(0, "S").log_density(np.zeros((1, 2)), {"S": -np.eye(2)[None]})
    with pytest.raises(ShapeError, match="as many rows as the mean and the value have entries"):
        sy.MultivariateNormal(MEAN, COVARIANCE).log_density(np.zeros((5, 2)))
    with pytest.raises(ShapeError, match="3 and 2"):
        sy.MultivariateNormal(MEAN, COVARIANCE).log_density(np.zeros((5, 2)))
    with pytest.raises(ShapeError, match="2 concentrations along the last axis"):
        sy.Dirichlet([1, 2, 3]).log_density([0.5, 0.5])
    with pytest.raises(ShapeError, match="square matrices of two rows or more"):
        sy.LKJCorrelation(1).log_density(np.ones((4, 3)))
    with pytest.raises(ShapeError, match="ends with the 1 axes"):
        sy.Dirichlet(1).log_density(0.5)
    with pytest.raises(ShapeError, match="ends with the 2 axes"):
        sy.LKJCorrelation(1).sample(3, rng=1)
