"""Bases that are more than equally weighted draws: predictive draws and approximations."""

from __future__ import annotations

from typing import Any

import numpy as np
import pytest
from scipy import stats

import steelyard as sy
from steelyard.errors import ChangeError, QuantityError, SteelyardError

RNG = np.random.default_rng(20_261_243)
MU = RNG.normal(size=(4, 200))
Y = MU + RNG.normal(size=(4, 200))
LOGLIK = stats.norm(MU[..., None], 1).logpdf(np.array([0.1, -0.2, 0.3]))
WIDER = stats.norm(MU[..., None], 1.2).logpdf(np.array([0.1, -0.2, 0.3]))


@pytest.fixture(scope="module")
def predicting() -> sy.Fit:
    return sy.Fit(
        {"mu": MU, "y": Y},
        {"mu": sy.Normal(0, 2)},
        {"gauge A": LOGLIK},
        derived=["y"],
        predictive={"y": "gauge A"},
    )


def test_predictive_draws_are_answered_while_their_model_stands(predicting: sy.Fit) -> None:
    for change in (sy.swap_prior(mu=sy.Normal(0, 1)), sy.drop([0]), sy.power(likelihood=0.9)):
        assert np.isfinite(predicting.reweigh(change).mean("y").value)


@pytest.mark.parametrize(
    "change",
    [sy.swap_loglik({"gauge A": WIDER}), sy.raise_noise("gauge A", 1.2, 1.0)],
    ids=["swapped", "noisier"],
)
def test_predictive_draws_are_refused_under_another_model_without_their_own_ratio(
    predicting: sy.Fit, change: sy.Change
) -> None:
    answer = predicting.reweigh(change)
    assert np.isfinite(answer.mean("mu").value)
    for ask in (
        lambda: answer.mean("y"),
        lambda: answer.prob("y > 0"),
        lambda: answer.mean(lambda d: d["y"]),
        lambda: answer.table(["y"]),
    ):
        with pytest.raises((SteelyardError, KeyError)) as caught:
            ask()
        assert "y" in str(caught.value)
    with pytest.raises(QuantityError) as told:
        answer.mean("y")
    assert "predictive=" in told.value.next_step


def test_predictive_draws_are_answered_with_their_own_ratio(predicting: sy.Fit) -> None:
    own = stats.norm(MU, 1.2).logpdf(Y) - stats.norm(MU, 1).logpdf(Y)
    change = sy.swap_loglik({"gauge A": WIDER}) & sy.log_ratio(own, predictive="y")
    answer = predicting.reweigh(change, smooth=False)
    total = WIDER.sum(2) - LOGLIK.sum(2) + own
    want = np.average(Y, weights=np.exp(total))
    # 1e-12: sums of 800 terms.
    assert answer.mean("y").value == pytest.approx(want, abs=1e-12)
    twice = change & sy.log_ratio(own, predictive="y")
    with pytest.raises(ChangeError, match="twice"):
        predicting.reweigh(twice)


@pytest.mark.parametrize(
    "predictive", [{"z": "gauge A"}, {"y": "gauge B"}, ["y"], {"y": 3}], ids=repr
)
def test_predictive_names_have_to_be_there(predictive: Any) -> None:
    with pytest.raises(SteelyardError) as caught:
        sy.Fit({"mu": MU, "y": Y}, loglik={"gauge A": LOGLIK}, predictive=predictive)
    assert "predictive" in caught.value.argument


def _approximate(log_density: Any, **more: Any) -> sy.Fit:
    return sy.Fit(
        {"mu": MU},
        {"mu": sy.Normal(0, 2)},
        LOGLIK,
        approximation=log_density,
        ordered=False,
        **more,
    )


APPROXIMATION = stats.norm(0, 1).logpdf(MU)


@pytest.mark.parametrize(
    "given",
    [APPROXIMATION, APPROXIMATION.ravel(), lambda d: stats.norm(0, 1).logpdf(d["mu"])],
    ids=["by chain", "stacked", "callable"],
)
def test_the_base_of_an_approximation_is_weighted_by_posterior_over_approximation(
    given: Any,
) -> None:
    base = _approximate(given).base
    total = stats.norm(0, 2).logpdf(MU) + LOGLIK.sum(2) - APPROXIMATION
    smoothed = sy.weights.smooth(total.ravel())
    # 1e-11: the same ratio summed in another order.
    np.testing.assert_allclose(base.log_weights.ravel(), smoothed.log_weights, atol=1e-10)
    assert base.tail_shape == pytest.approx(smoothed.tail_shape, abs=1e-9)


def test_an_approximation_gives_the_posterior_it_stands_for() -> None:
    # Conjugate: precision 3 + 1/4, mean 0.2/3.25; five errors of 800 draws, false alarm 6e-7.
    mean = _approximate(APPROXIMATION).base.mean("mu")
    assert abs(mean.value - 0.2 / 3.25) <= 5 * mean.error


def test_a_change_of_an_approximation_is_weighed_against_the_corrected_base() -> None:
    fit = _approximate(APPROXIMATION)
    answer = fit.reweigh(sy.swap_prior(mu=sy.Normal(0, 1)))
    total = stats.norm(0, 1).logpdf(MU) + LOGLIK.sum(2) - APPROXIMATION
    # 1e-10: the same ratio summed in another order.
    np.testing.assert_allclose(
        answer.log_weights.ravel(), sy.weights.smooth(total.ravel()).log_weights, atol=1e-10
    )


def test_a_poor_approximation_is_told_by_the_verdict_of_the_base() -> None:
    narrow = stats.norm(0, 0.2).logpdf(MU)
    assert _approximate(narrow).base.verdict.level == "refit"


@pytest.mark.parametrize("missing", ["prior", "loglik"])
def test_an_approximation_needs_a_stated_posterior(missing: str) -> None:
    stated = {"prior": {"mu": sy.Normal(0, 2)}, "loglik": LOGLIK}
    with pytest.raises(SteelyardError) as caught:
        sy.Fit({"mu": MU}, approximation=APPROXIMATION, **{**stated, missing: None})
    assert "approximation" in caught.value.argument


def test_what_the_sampler_stored_is_read_and_aligned() -> None:
    for stored in (MU, MU.ravel()):
        sy.Fit({"mu": MU}, stored_log_density=stored)
    with pytest.raises(sy.errors.ShapeError, match="stored_log_density"):
        sy.Fit({"mu": MU}, stored_log_density=MU.T)


def test_a_fit_of_draws_alone_is_legal() -> None:
    fit = sy.Fit({"mu": MU})
    answer = fit.reweigh(sy.log_ratio(0.2 * MU))
    assert answer.mean("mu").value > fit.base.mean("mu").value
    assert "not stated" in repr(fit)
    assert fit._repr_html_().startswith("<")


def test_a_fit_shows_its_draws_terms_and_observations(predicting: sy.Fit) -> None:
    for part in ("800", "4 chains", "mu", "gauge A", "3"):
        assert part in repr(predicting)
