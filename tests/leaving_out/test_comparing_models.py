"""Two models on the same observations: paired differences, sentences, and mixtures of models."""

from __future__ import annotations

import numpy as np
import pytest

import steelyard as sy
from steelyard.leaving_out import LeaveOut, combine, leave_out
from steelyard.leaving_out.combining import simplex_weights

from .models import Array, Regression, regression_loglik

SEED = 65


def _left(x: Array, y: Array, degree: int, draws_wanted: int = 4000) -> LeaveOut:
    X = np.stack([x**d for d in range(degree + 1)], axis=1)
    draws = Regression.reference_prior(X, y).draws(
        np.random.default_rng([SEED, degree]), draws_wanted
    )
    fit = sy.Fit(draws, loglik=regression_loglik(draws, X, y), ordered=False)
    return leave_out(fit._record)


def _data(curve: float, count: int) -> tuple[Array, Array]:
    x = np.linspace(-1, 1, count)
    return x, x + curve * x**2 + 0.3 * np.random.default_rng(SEED).normal(size=count)


def test_the_difference_is_paired() -> None:
    x, y = _data(1.0, 120)
    line, bend = _left(x, y, 1), _left(x, y, 2)
    found = bend.contrast(line)
    gaps = bend.by_group.value - line.by_group.value
    assert found.difference.value == pytest.approx(gaps.sum())
    assert found.error == pytest.approx(np.sqrt(len(gaps) * gaps.var(ddof=1)))
    assert found.error < np.hypot(bend.sampling_error, line.sampling_error)
    assert found.difference.error == pytest.approx(
        np.hypot(bend.log_score.error, line.log_score.error)
    )
    back = line.contrast(bend)
    assert back.difference.value == -found.difference.value
    assert "this model predicts better" in found.sentence
    assert "the other model predicts better" in back.sentence


def test_a_difference_too_small_to_tell_is_said_to_be() -> None:
    x, y = _data(0.0, 120)
    assert "too small to tell" in _left(x, y, 1).contrast(_left(x, y, 2)).sentence


def test_a_sample_too_small_to_tell_is_said_to_be() -> None:
    x, y = _data(2.0, 25)
    found = _left(x, y, 2).contrast(_left(x, y, 1))
    assert found.difference.value > 4
    assert "With 25 groups" in found.sentence


def test_scores_that_ask_for_a_refit_are_not_compared() -> None:
    x, y = _data(1.0, 120)
    bend = _left(x, y, 2)
    fit = sy.Fit({"far": np.random.default_rng(1).normal(size=100)})
    rng = np.random.default_rng(SEED)
    wild = 40 * rng.standard_cauchy(size=(100, 120))
    fit = sy.Fit({"far": rng.normal(size=100)}, loglik=wild, ordered=False)
    found = bend.contrast(leave_out(fit._record))
    assert "refit" in found.sentence


def test_a_contrast_with_itself_is_nothing() -> None:
    x, y = _data(1.0, 40)
    bend = _left(x, y, 2)
    assert bend.contrast(bend).sentence == "Both models give every group the same score."


@pytest.mark.parametrize("models", [2, 3, 8])
@pytest.mark.parametrize("groups", [5, 50, 2000])
def test_weights_of_a_mixture_meet_the_conditions_of_a_maximum(models: int, groups: int) -> None:
    scores = np.random.default_rng([SEED, models, groups]).normal(size=(groups, models)) * 3
    weights, gap = simplex_weights(scores)
    assert gap < 1e-8
    assert weights.sum() == pytest.approx(1, abs=1e-12)
    assert np.all(weights >= 0)
    density = np.exp(scores)
    gradient = (density / (density @ weights)[:, None]).mean(axis=0)
    assert np.all(gradient < 1 + 1e-8)
    assert np.all(np.abs(gradient[weights > 1e-6] - 1) < 1e-8)


def test_two_models_have_the_weights_that_a_fine_grid_finds() -> None:
    scores = np.random.default_rng(SEED).normal(size=(300, 2))
    weights, _ = simplex_weights(scores)
    grid = np.linspace(0, 1, 20_001)
    total = np.log(np.exp(scores[:, :1]) * grid + np.exp(scores[:, 1:]) * (1 - grid)).sum(axis=0)
    assert abs(grid[np.argmax(total)] - weights[0]) <= 1e-4


@pytest.mark.parametrize("far", [5.0, 500.0])
def test_equal_and_hopeless_models_are_no_trouble(far: float) -> None:
    good = np.random.default_rng(SEED).normal(size=60)
    scores = np.stack([good, good, good - far], axis=1)
    weights, gap = simplex_weights(scores)
    assert gap < 1e-8
    assert weights[2] < 1e-8


def test_a_mixture_of_fits_predicts_no_worse_than_the_best() -> None:
    x, y = _data(0.5, 80)
    models = {"line": _left(x, y, 1), "bend": _left(x, y, 2), "level": _left(x, y, 0)}
    found = combine(models)
    best = max(m.log_score.value for m in models.values())
    assert found.log_score >= best - 1e-9
    assert found.gap < 1e-8
    assert sum(found.weights.values()) == pytest.approx(1)
    assert max(found.weights, key=lambda name: found.weights[name]) == "bend"
    assert found.by_group.sum() == pytest.approx(found.log_score)
    assert "bend" in str(found)
