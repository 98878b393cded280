"""Collapse: group effects integrated out, against quadrature over everything."""

from __future__ import annotations

import functools
import math
from collections.abc import Mapping

import numpy as np
import pytest
from numpy.typing import NDArray
from scipy import integrate, stats

import steelyard as sy
from steelyard.errors import ChangeError, LikelihoodError
from steelyard.repair.quadrature import NODES, grid_of

Array = NDArray[np.float64]
Draws = Mapping[str, Array]
SEED = 20_261_212
GROUPS = 40
TAU = 1.0


@functools.cache
def _readings() -> tuple[Array, Array]:
    """Two readings of each of 40 quays, their effects normal about 0; spread of the noise 1."""
    rng = np.random.default_rng(SEED)
    effect = rng.normal(0, TAU, size=GROUPS)
    owner = np.repeat(np.arange(GROUPS), 2)
    return effect[owner] + rng.normal(size=2 * GROUPS), owner


def loglik(d: Draws) -> Array:
    y, owner = _readings()
    return np.asarray(-0.5 * (y - d["rate"][:, owner]) ** 2 - 0.5 * math.log(2 * math.pi))


@functools.cache
def _fit(count: int = 300) -> sy.Fit:
    """Exact draws: mu is normal given the data once the effects are integrated out."""
    rng = np.random.default_rng(SEED + 1)
    y, owner = _readings()
    means = np.bincount(owner, y) / 2
    precision = GROUPS / (TAU**2 + 0.5) + 1 / 9
    mu = rng.normal(means.sum() / (TAU**2 + 0.5) / precision, precision**-0.5, size=4 * count)
    inner = 1 / TAU**2 + 2
    rate = (2 * means + mu[:, None] / TAU**2) / inner
    rate = rate + rng.normal(size=rate.shape) / math.sqrt(inner)
    return sy.Fit(
        {"rate": rate.reshape(4, count, GROUPS), "mu": mu.reshape(4, count)},
        {"rate": sy.Normal("mu", TAU), "mu": sy.Normal(0, 3)},
        loglik,
    )


HEAVY = sy.swap_prior(rate=sy.StudentT(1.5, "mu", TAU))


@functools.cache
def _exact() -> tuple[Array, Array]:
    """Mean and sd of mu, and the mean of rate[0], by nested quadrature under the heavy family."""
    y, owner = _readings()
    means = np.bincount(owner, y) / 2
    mu = np.linspace(-1.2, 1.2, 81)
    r = np.linspace(-10, 10, 1001)
    log, first = stats.norm.logpdf(mu, 0, 3), np.zeros(81)
    heavy = stats.t.pdf(r - mu[:, None], 1.5)
    for j in range(GROUPS):
        f = heavy * stats.norm.pdf(means[j], r, math.sqrt(0.5))
        mass = integrate.simpson(f, x=r, axis=1)
        log = log + np.log(mass)
        if j == 0:
            first = integrate.simpson(f * r, x=r, axis=1) / mass
    w = np.exp(log - log.max())
    w /= w.sum()
    mean = float(w @ mu)
    return np.array([mean, float(np.sqrt(w @ (mu - mean) ** 2)), float(w @ first)]), mu


def test_forty_effects_that_weights_carry_badly_collapse_to_their_mean() -> None:
    answer = _fit().repair(HEAVY, rng=1)
    assert answer.ladder["smoothing"].level < "sound"
    assert answer.ladder.chosen == "collapse"
    assert [r.name for r in answer.ladder] == ["smoothing", "collapse"]
    assert answer.verdict.is_sound
    # The weights vary with mu alone, and little.
    assert answer.effective_size > 800
    exact, _ = _exact()
    pairs = zip((answer.mean("mu"), answer.sd("mu"), answer.mean("rate[0]")), exact, strict=True)
    for estimate, truth in pairs:
        assert abs(estimate.value - truth) <= 4 * estimate.error


def test_collapse_goes_with_other_changes_and_counts_its_price() -> None:
    change = HEAVY & sy.swap_prior(mu=sy.Normal(0.5, 0.3)) & sy.drop([0])
    answer = _fit().repair(change, rungs="collapse", rng=1)
    rung = answer.ladder["collapse"]
    assert rung.evaluations == (NODES + 4) * 1200
    assert answer.verdict.is_sound
    other = _fit().repair(change, rungs="tempering", rng=2)
    for quantity in ("mu", "rate[0]", "rate[7]"):
        one, two = answer.mean(quantity), other.mean(quantity)
        # Two independent errors.
        assert abs(one.value - two.value) <= 4 * math.hypot(one.error, two.error)


def test_a_family_made_normal_again_collapses_to_itself() -> None:
    """The weights of no change at all are even, though every effect is drawn anew."""
    back = sy.swap_prior(rate=sy.StudentT(1e6, "mu", TAU))
    rung = _fit().repair(back, rungs="collapse", rng=1).ladder["collapse"]
    # What is left is the interpolation between nodes, which the weights take back.
    assert rung.effective_size > 0.97 * 1200


DOES_NOT_APPLY: dict[str, tuple[sy.Change, str]] = {
    "no group": (sy.swap_prior(mu=sy.Normal(0, 1)), "0 such terms"),
    "a family without quadrature": (sy.swap_prior(rate=sy.Laplace("mu", 1.0)), "0 such terms"),
    "a given ratio": (HEAVY & sy.log_ratio(lambda d: d["rate"][:, 0]), "a given ratio"),
    "a total": (HEAVY & sy.add({"all": lambda d: -(d["rate"].sum(axis=1) ** 2)}), "a total"),
}


@pytest.mark.parametrize("name", DOES_NOT_APPLY)
def test_where_collapse_does_not_apply_it_says_so(name: str) -> None:
    change, said = DOES_NOT_APPLY[name]
    with pytest.raises(ChangeError, match=said):
        _fit().repair(change, rungs="collapse")


def test_a_limit_below_the_price_leaves_collapse_out() -> None:
    ladder = _fit().repair(HEAVY, rungs="collapse", most_evaluations=1000).ladder
    assert "limit" in ladder["collapse"].stopped


def test_an_array_of_likelihoods_cannot_be_collapsed() -> None:
    fit = _fit()
    prior = {"rate": sy.Normal("mu", TAU), "mu": sy.Normal(0, 3)}
    fixed = sy.Fit(dict(fit.draws), prior, loglik(fit.draws))
    with pytest.raises(LikelihoodError, match="callable"):
        fixed.repair(HEAVY, rungs="collapse")
    far = HEAVY & sy.swap_prior(mu=sy.Normal(5, 0.1))
    assert "not possible" in fixed.repair(far).ladder["collapse"].stopped


def test_quadrature_integrates_and_draws_what_it_integrates() -> None:
    rng = np.random.default_rng(3)
    centre, scale = rng.normal(size=(2000, 2)), np.full((2000, 2), 0.7)
    grid = grid_of(centre + 0.3, scale)
    normal, heavy = (
        stats.norm.logpdf(grid.nodes, centre, scale),
        stats.t.logpdf(grid.nodes, 4, centre, scale),
    )
    # Exponential convergence for the normal; the tails of the other beyond 20 scales hold 4e-5.
    np.testing.assert_allclose(grid.log_integral(normal), 0, atol=1e-9)
    np.testing.assert_allclose(grid.log_integral(heavy), 0, atol=2e-4)
    drawn, log_density = grid.draw(normal, rng)
    z = (drawn - centre) / scale
    # 4,000 draws: p-values below 1e-4 are a false alarm in one of 5,000 seeds.
    assert stats.kstest(z.reshape(-1), "norm").pvalue > 1e-4
    ratio = np.exp(stats.norm.logpdf(drawn, centre, scale) - log_density)
    assert abs(ratio.mean() - 1) < 0.005
    assert ratio.std() < 0.05
