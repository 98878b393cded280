"""Family 2: left-out log scores, tail shapes and blocks in closed form, on exact draws.

A comparison of a log score allows four of its own errors, false alarm 6.3e-5 for a normal
deviate, where the tail index is below one half; where it is above, the error carries the
allowance for unseen weight and the same four errors are asked for. About 160 comparisons: false
alarm near 1 % at a new seed. An estimated tail shape may miss its limit by 0.15 plus three
spreads of the estimator, ``3 (1 + k)/sqrt(M)``; row 21 apart (see there).
"""

from __future__ import annotations

import functools
from typing import Any

import numpy as np
import pytest

import steelyard as sy
from steelyard.leaving_out import LeaveOut, leave_out

from . import cases
from .models import (
    Regression,
    known_sigma_draws,
    normal_log_density,
    poisson_loglik,
    regression_loglik,
)

DRAWS = 40_000
SEED = 2_020


def _fit(draws: dict[str, Any], loglik: Any) -> Any:
    one_chain = np.zeros(DRAWS, dtype=int)
    return sy.Fit(draws, loglik=loglik, chain=one_chain, ordered=False)._record


@functools.cache
def _left(identifier: str) -> LeaveOut:
    rng = np.random.default_rng([SEED, int(identifier[3:])])
    y = cases.data(identifier, "y")
    if identifier == "P2.5":
        inputs = cases.case(identifier)["inputs"]
        rate = rng.gamma(inputs["a"] + y.sum(), 1 / (inputs["b"] + len(y)), size=DRAWS)
        return leave_out(_fit({"rate": rate}, poisson_loglik(rate, y)))
    X = cases.data(identifier, "X")
    if identifier == "P2.2":
        sigma = cases.case(identifier)["inputs"]["sigma"]
        draws = known_sigma_draws(X, y, sigma, rng, DRAWS)
        return leave_out(_fit(draws, normal_log_density(y, draws["beta"] @ X.T, sigma**2)))
    if identifier in ("P2.3", "P2.4"):
        inputs = cases.case(identifier)["inputs"]
        posterior = Regression.conjugate(
            X, y, np.array(inputs["m0"]), np.array(inputs["V0"]), inputs["a0"], inputs["b0"]
        )
        groups = inputs.get("groups")
    else:
        if identifier == "P2.6":
            X = np.column_stack([(X[:, :-1] - X[:, :-1].mean(0)) / X[:, :-1].std(0), X[:, -1]])
        posterior, groups = Regression.reference_prior(X, y), None
    draws = posterior.draws(rng, DRAWS)
    return leave_out(_fit(draws, regression_loglik(draws, X, y)), groups)


ROWS = ["P2.1", "P2.2", "P2.3", "P2.5", "P2.6"]


@pytest.mark.parametrize("identifier", ROWS)
def test_each_left_out_log_score_is_the_closed_form(identifier: str) -> None:
    score = _left(identifier).by_group
    exact = cases.expected(identifier, "deletion_log_score")
    assert np.all(np.abs(score.value - exact) <= 4 * score.error)


@pytest.mark.parametrize("identifier", ["P2.1", "P2.2", "P2.3", "P2.5"])
def test_errors_of_rows_with_finite_variance_are_the_first_order_ones(identifier: str) -> None:
    """``sqrt((S/ESS − 1)/S)`` from the closed form; the weights' variance is itself noisy."""
    ess = cases.expected(identifier, "limit_ess_fraction")
    tame = cases.expected(identifier, "tail_index_k") < 0.25
    ratio = _left(identifier).by_group.error[tame] / np.sqrt((1 / ess[tame] - 1) / DRAWS)
    assert np.all((ratio > 0.8) & (ratio < 1.25))


@pytest.mark.parametrize("identifier", ["P2.1", "P2.2", "P2.3", "P2.5"])
def test_the_total_is_the_closed_form_and_its_error_is_not_a_sum_in_quadrature(
    identifier: str,
) -> None:
    left = _left(identifier)
    exact = cases.expected(identifier, "log_score_total")
    assert abs(left.log_score.value - exact) <= 4 * left.log_score.error
    assert left.log_score.value == pytest.approx(float(left.by_group.value.sum()), rel=1e-12)


@pytest.mark.parametrize("identifier", ["P2.1", "P2.2", "P2.3"])
def test_tail_shapes_lie_near_their_limits(identifier: str) -> None:
    """M = 600 tail draws: the estimator spreads by about (1 + k)/sqrt(M) = 0.05.

    Row 21 is an outlier: the weights of 40,000 draws are still heavier than in the limit.
    """
    gap = _left(identifier).tail_shape - cases.expected(identifier, "tail_index_k")
    assert abs(float(np.median(gap))) < 0.15
    assert np.all(np.abs(gap[:20]) < 0.15 + 3 * 1.5 / np.sqrt(600))
    assert gap[20] > -0.15


def test_row_21_of_the_stack_loss_data_has_the_worst_weights() -> None:
    left = _left("P2.1")
    assert int(np.argmax(left.tail_shape)) == 20
    assert int(np.argmin(left.effective_size)) == 20
    assert left.influential("beta[1]", 1)["group"] == ("20",)
    assert cases.expected("P2.1", "infinite_variance")[20]


def test_in_sample_scores_and_optimism_are_the_closed_form() -> None:
    left = _left("P2.1")
    exact = cases.expected("P2.1", "in_sample_log_posterior_predictive")
    # The density of a draw varies by less than a factor of three about its mean: four errors of
    # the mean of 40,000 are below 0.03, the far tail of row 21 included.
    assert np.all(np.abs(left.in_sample - exact) < 0.05)
    gap = float(exact.sum()) - cases.expected("P2.1", "log_score_total")
    assert abs(left.optimism.value - gap) <= 4 * left.optimism.error


def test_blocks_and_a_pair_are_scored_jointly_and_not_called_sound() -> None:
    """Tail indices of 0.69 to 0.93: only the verdict can be right, and the score near."""
    left = _left("P2.4")
    exact = cases.expected("P2.4", "group_log_score")
    assert left.by_group.value.shape == (4,)
    heavy = cases.expected("P2.4", "tail_index_k") > 0.75
    assert not np.any(left.by_group.verdict.is_sound[heavy])
    finite = np.isfinite(left.by_group.error)
    assert np.all(np.abs(left.by_group.value - exact)[finite] <= 4 * left.by_group.error[finite])
    assert left.verdict.level != "sound"


def test_longley_rows_of_infinite_variance_get_larger_errors_than_first_order() -> None:
    left = _left("P2.6")
    wild = cases.expected("P2.6", "tail_index_k") > 0.6
    assert np.median(left.by_group.error[wild]) > np.median(left.by_group.error[~wild])
