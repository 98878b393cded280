"""Family 11: K-fold, and a series looked ahead with refits from exact posteriors.

Comparisons allow four reported errors, false alarm 6.3e-5 each; about 120 of them.
"""

from __future__ import annotations

from typing import Any

import numpy as np
import pytest

import steelyard as sy
from steelyard.leaving_out import k_fold, look_ahead

from . import cases
from .models import Array, Regression, regression_loglik

DRAWS = 10_000
SEED = 1_100


def _rows() -> tuple[Array, Array]:
    y = cases.data("P11.1", "y")
    return np.column_stack([np.ones(len(y) - 1), y[:-1]]), y[1:]


def _fit_of_first(point: int, count: int = DRAWS) -> tuple[Any, Array]:
    """Exact draws given the rows before `point`, and all rows' log likelihood at them."""
    X, y = _rows()
    inputs = cases.case("P11.1")["inputs"]
    posterior = Regression.conjugate(
        X[:point],
        y[:point],
        np.array(inputs["m0"]),
        np.array(inputs["V0"]),
        inputs["a0"],
        inputs["b0"],
    )
    draws = posterior.draws(np.random.default_rng([SEED, point]), count)
    values = regression_loglik(draws, X, y)
    fit = sy.Fit(draws, loglik=values[:, :point], ordered=False)
    return fit, values


@pytest.mark.parametrize("steps", [1, 4])
@pytest.mark.parametrize("count", [400, DRAWS])
def test_looking_ahead_with_refits_gives_the_exact_score(steps: int, count: int) -> None:
    start = cases.case("P11.1")["inputs"]["first_row_predicted"]
    fit, values = _fit_of_first(start, count)
    made: list[int] = []

    def refit(point: int) -> tuple[Any, Array]:
        made.append(point)
        return _fit_of_first(point, count)

    ahead = look_ahead(fit._record, values, from_=start, steps=steps, refit=refit, until="strained")
    assert len(made) >= 1 or count == DRAWS
    exact = cases.case("P11.1")["expected"][f"steps_{steps}"]["log_score"]["value"]
    assert abs(ahead.log_score.value - exact) <= 4 * ahead.log_score.error
    assert ahead.refit_due == tuple(made)
    assert ahead.refits_needed == len(made)
    assert not ahead.is_forecast
    assert len(ahead.by_point.value) == values.shape[1] - start - steps + 1
    assert ahead.by_point.verdict.is_sound.all()


def test_without_refits_the_point_where_one_is_due_is_said_and_the_number_forecast() -> None:
    fit, values = _fit_of_first(2)
    ahead = look_ahead(fit._record, values, from_=2)
    assert ahead.is_forecast
    (due,) = ahead.refit_due
    assert 2 < due < values.shape[1]
    assert "A refit is due" in ahead.sentence
    assert ahead.verdict.level == "refit"
    levels = [str(level) for level in ahead.by_point.verdict.level]
    assert "refit" not in levels[: due - 2]
    assert levels[due - 2] == "refit"

    def refit(point: int) -> tuple[Any, Array]:
        return _fit_of_first(point)

    counted = look_ahead(fit._record, values, from_=2, refit=refit)
    assert counted.refit_due[0] == due
    # A forecast by proportion: the right order of magnitude is what it is for.
    assert counted.refits_needed / 3 <= ahead.refits_needed <= 3 * counted.refits_needed


def test_known_parameters_need_no_weights_and_give_the_exact_sum() -> None:
    """P11.2: every draw has the same density, so that nothing is weighed."""
    one_step = np.array(cases.case("P11.2")["expected"]["one_step"]["value"])
    draws = {"phi": np.random.default_rng(SEED).normal(size=500)}
    values = np.repeat(one_step[None, :], 500, axis=0)
    fit = sy.Fit(draws, loglik=values[:, :1])
    ahead = look_ahead(fit._record, values, from_=1)
    np.testing.assert_allclose(ahead.by_point.value, one_step[1:], rtol=1e-12)
    assert ahead.refit_due == ()
    assert ahead.refits_needed == 0
    assert ahead.verdict.is_sound


def test_each_step_is_the_density_under_the_posterior_of_the_past() -> None:
    start = 20
    fit, values = _fit_of_first(start)
    ahead = look_ahead(fit._record, values, from_=start)
    for point in range(start, start + 12):
        _, theirs = _fit_of_first(point)
        plain = np.exp(theirs[:, point])
        score, error = np.log(plain.mean()), plain.std() / plain.mean() / np.sqrt(DRAWS)
        both = np.hypot(error, ahead.by_point.error[point - start])
        assert abs(ahead.by_point.value[point - start] - score) <= 4 * both


def test_five_folds_of_the_stopping_distances_have_the_exact_joint_scores() -> None:
    inputs = cases.case("P11.3")["inputs"]
    X, y = np.array(inputs["X"]), np.array(inputs["y"])
    posterior = Regression.conjugate(
        X, y, np.array(inputs["m0"]), np.array(inputs["V0"]), inputs["a0"], inputs["b0"]
    )
    draws = posterior.draws(np.random.default_rng([SEED, 3]), 40_000)
    fit = sy.Fit(draws, loglik=regression_loglik(draws, X, y), ordered=False)
    for folds in (inputs["folds"], np.arange(50) % 5):
        left = k_fold(fit._record, folds)
        exact = cases.expected("P11.3", "group_log_score")
        assert np.all(np.abs(left.by_group.value - exact) <= 4 * left.by_group.error)
        assert abs(left.log_score.value - exact.sum()) <= 4 * left.log_score.error
