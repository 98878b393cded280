"""Bioassay and stack loss: changes out of reach of the weights against exact values."""

from __future__ import annotations

import functools

import numpy as np
import pytest
from numpy.typing import NDArray
from scipy import special, stats

import steelyard as sy
from steelyard.repair import left_out

from .models import (
    GRID,
    SCORES,
    Regression,
    X,
    Y,
    grid_draws,
    grid_weights,
    logit_loglik,
    probit_loglik,
    stack_loss_loglik,
)

Array = NDArray[np.float64]
WIDE = {"intercept": sy.Normal(0, 10), "slope": sy.Normal(0, 20)}
AT = {"intercept": GRID[:, 0], "slope": GRID[:, 1]}


@functools.cache
def _bioassay() -> sy.Fit:
    """Exact draws under the wide prior, 4 chains of 1,000."""
    weights = grid_weights(_normal((0, 0), (10, 20)), logit_loglik(AT).sum(axis=1))
    drawn = grid_draws(weights, 4000, np.random.default_rng(1307))
    return sy.Fit({k: v.reshape(4, 1000) for k, v in drawn.items()}, WIDE, logit_loglik)


def _exact(log_prior: Array, factor: Array, *, probit: bool = False) -> tuple[Array, Array]:
    """Means and sds by quadrature on a grid of 10^6 points."""
    w = grid_weights(log_prior, (probit_loglik if probit else logit_loglik)(AT) @ factor)
    mean = w @ GRID
    return mean, np.sqrt(w @ (GRID - mean) ** 2)


def _normal(means: tuple[float, float], sds: tuple[float, float]) -> Array:
    return np.asarray(stats.norm.logpdf(GRID, means, sds).sum(axis=1))


# A change, and the exact moments of its target.
BIOASSAY = {
    "a sceptical prior": (
        sy.swap_prior(intercept=sy.Normal(-2, 0.5), slope=sy.Normal(2, 0.7)),
        lambda: _exact(_normal((-2, 2), (0.5, 0.7)), np.ones(4)),
    ),
    "a steep prior": (
        sy.swap_prior(slope=sy.Normal(45, 4)),
        lambda: _exact(_normal((0, 45), (10, 4)), np.ones(4)),
    ),
    "every animal counted 400 times": (
        sy.power(likelihood=400),
        lambda: _exact(_normal((0, 0), (10, 20)), np.full(4, 400.0)),
    ),
    "two groups dropped": (
        sy.drop([1, 2]),
        lambda: _exact(_normal((0, 0), (10, 20)), np.array([1.0, 0, 0, 1])),
    ),
    "a probit curve on less data": (
        sy.swap_loglik(probit_loglik) & sy.drop([1]),
        lambda: _exact(_normal((0, 0), (10, 20)), np.array([1.0, 0, 1, 1]), probit=True),
    ),
}


@pytest.mark.parametrize("name", BIOASSAY)
def test_a_bioassay_out_of_reach_of_the_weights_matches_the_exact_values(name: str) -> None:
    change, exact = BIOASSAY[name]
    assert _bioassay().reweigh(change).verdict.level < "sound"
    answer = _bioassay().repair(change, rng=13)
    means, sds = exact()
    assert answer.verdict.is_sound
    for i, quantity in enumerate(("intercept", "slope")):
        for estimate, truth in (
            (answer.mean(quantity), means[i]),
            (answer.sd(quantity), sds[i]),
        ):
            # The bound; the grid is exact to far below any error here.
            assert abs(estimate.value - truth) <= 4 * estimate.error


@functools.cache
def _stack_loss() -> sy.Fit:
    """Exact draws under the reference prior, stated as flat in β and 1/σ² in σ²."""
    drawn = Regression.without([]).draws(np.random.default_rng(5), 4000)
    draws = {k: v.reshape(4, 1000, *v.shape[1:]) for k, v in drawn.items()}
    prior = {
        "beta": sy.Flat(),
        "variance": sy.Flat(0),
        "reference": lambda d: -np.log(d["variance"]),
    }
    return sy.Fit(draws, prior, stack_loss_loglik)


@pytest.mark.parametrize("gone", [[20], [20, 3], [0, 2, 3, 20]], ids=str)
def test_stack_loss_without_its_outliers_matches_the_closed_form(gone: list[int]) -> None:
    exact = Regression.without(gone)
    assert _stack_loss().reweigh(sy.drop(gone)).verdict.level < "sound"
    answer = _stack_loss().repair(sy.drop(gone), rng=2)
    assert answer.verdict.is_sound
    mean = answer.mean("beta")
    assert np.all(np.abs(mean.value - exact.m) <= 4 * mean.error)
    log_sd = answer.mean(lambda d: np.log(d["variance"]))
    # The mean of the log of an inverse gamma: log b − ψ(a).
    truth = np.log(exact.b) - special.digamma(exact.a)
    assert abs(log_sd.value - truth) <= 4 * log_sd.error


def test_groups_whose_weights_fail_are_cured_with_the_closed_form_scores() -> None:
    left = _stack_loss().leave_out()
    failed = np.flatnonzero(left.by_group.verdict.level < "sound")
    assert 20 in failed
    cured = left_out(_stack_loss(), left, rng=3)
    assert [int(name) for name in cured.scores] == failed.tolist()
    for name, score in cured.scores.items():
        assert score.verdict.is_sound
        assert abs(score.value - SCORES[int(name)]) <= 4 * score.error
        assert cured.ladders[name].evaluations > 0
    assert cured.left_out.verdict.is_sound
    assert left.verdict.level < "sound"
    total = cured.left_out.log_score
    assert abs(total.value - SCORES.sum()) <= 4 * total.error
    assert "moment matching" in str(cured)
    assert len(cured.table()) == len(failed)


def test_curing_says_what_it_cannot_do() -> None:
    fit = _stack_loss()
    left = fit.leave_out()
    with pytest.raises(sy.errors.UnknownNameError, match="groups"):
        left_out(fit, left, [99])
    with pytest.raises(sy.errors.ArgumentTypeError, match="left"):
        left_out(fit, fit)
    fixed = sy.Fit(dict(fit.draws), loglik=stack_loss_loglik(fit.draws))
    with pytest.raises(sy.errors.LikelihoodError, match="callable"):
        left_out(fixed, fixed.leave_out(), [20])


def test_pairs_of_rows_are_cured_as_groups() -> None:
    fit = _stack_loss()
    left = fit.leave_out([[20, 3], [0, 2]])
    cured = left_out(fit, left, [0], rng=1)
    exact = Regression.without([3, 20])
    # A joint Student-t of 2a degrees about the prediction.
    gone = X[[20, 3]]
    shape = exact.b / exact.a * (np.eye(2) + gone @ exact.V @ gone.T)
    truth = stats.multivariate_t(gone @ exact.m, shape, df=2 * exact.a).logpdf(Y[[20, 3]])
    (score,) = cured.scores.values()
    assert score.verdict.is_sound
    assert abs(score.value - truth) <= 4 * score.error
