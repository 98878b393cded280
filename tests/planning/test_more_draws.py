"""How many draws an error asks for, and what a refit is worth to a decision."""

from __future__ import annotations

import math

import numpy as np
import pytest

import steelyard as sy

SEED = 20_261_209


@pytest.fixture(scope="module")
def fit() -> sy.Fit:
    rng = np.random.default_rng(SEED)
    return sy.Fit({"mu": rng.normal(size=4000)}, {"mu": sy.Normal(0, 1)}, ordered=False)


def test_half_the_error_asks_for_four_times_the_draws(fit: sy.Fit) -> None:
    now = fit.base.mean("mu").error
    found = fit.more_draws("mu", now / 2)
    assert found.draws == pytest.approx(16_000, abs=1)
    assert found.exponent == 0.5
    assert "4 times" in str(found)
    assert fit.more_draws("mu", 2 * now).draws == 4000
    assert "enough" in str(fit.more_draws("mu", 2 * now))


def test_the_number_asked_for_gives_the_error() -> None:
    rng = np.random.default_rng(SEED)
    first = sy.Fit({"mu": rng.normal(size=1000)}, ordered=False)
    needed = int(first.more_draws("mu > 1", 0.004, of="prob").draws)
    longer = sy.Fit({"mu": rng.normal(size=needed)}, ordered=False)
    # The first error is known to √(1/2/1000) times a few: 10 %.
    assert longer.base.prob("mu > 1").error == pytest.approx(0.004, rel=0.1)


def test_heavy_tails_ask_for_more(fit: sy.Fit) -> None:
    """Weights of a normal prior widened so far that their tail shape is above one half."""
    change = sy.swap_prior(mu=sy.Normal(0, 1.9))
    answer = fit.reweigh(change)
    estimate = answer.sd("mu")
    shape = float(estimate.tail_shape)
    assert 0.5 < shape < 1
    found = fit.more_draws("mu", estimate.error / 2, change=change, of="sd")
    assert found.exponent == pytest.approx(1 - shape)
    assert found.draws == pytest.approx(4000 * 2 ** (1 / (1 - shape)), rel=1e-3)
    assert found.draws > 16_000


def test_no_number_will_do_without_a_mean() -> None:
    u = (np.random.default_rng(SEED).permutation(4000) + 0.5) / 4000
    fit = sy.Fit({"loss": u**-1.5}, ordered=False)
    found = fit.more_draws("loss", 1e-3)
    assert found.draws == math.inf
    assert "no number" in str(found)


def test_elements_have_their_own_number() -> None:
    rng = np.random.default_rng(SEED)
    fit = sy.Fit({"rate": rng.normal(size=(4, 250, 2)) * [1.0, 3.0]}, ordered=False)
    found = fit.more_draws("rate", 0.01)
    assert found.draws.shape == (2,)
    assert found.draws[1] / found.draws[0] == pytest.approx(9, rel=0.2)


def test_a_decision_that_is_sure_needs_no_refit(fit: sy.Fit) -> None:
    change = sy.swap_prior(mu=sy.Normal(0, 0.9))
    found = fit.value_of_refit(change, "mu > 0", 0.2)
    assert found.right_now == pytest.approx(1, abs=1e-12)
    assert found.value == pytest.approx(0, abs=1e-12)
    assert "over 0.999" in str(found)


def test_value_of_a_refit_against_simulated_refits(fit: sy.Fit) -> None:
    """Beliefs drawn, refits simulated: 10⁶ futures, figures within 4 of their errors."""
    change = sy.swap_prior(mu=sy.Normal(0, 0.9))
    p = fit.reweigh(change).prob("mu > 0")
    level = float(p.value) - 0.7 * float(p.error)
    found = fit.value_of_refit(change, "mu > 0", level, draws=3000)
    rng = np.random.default_rng(SEED)
    truth = p.value + p.error * rng.normal(size=1_000_000)
    fresh = np.sqrt(p.value * (1 - p.value) / 3000)
    seen = truth + fresh * rng.normal(size=truth.size)
    share = p.error**2 / (p.error**2 + fresh**2)
    believed = (1 - share) * p.value + share * seen
    right = (believed > level) == (truth > level)
    assert found.right_after == pytest.approx(right.mean(), abs=4 * 0.5e-3)
    gain = np.where(believed > level, truth - level, 0.0) - (truth - level)
    assert found.value == pytest.approx(gain.mean(), abs=4 * gain.std() / 1000)
    now = (truth > level).mean()
    assert found.right_now == pytest.approx(now, abs=4 * 0.5e-3)
    assert found.right_now < found.right_after
    assert 0 < found.value < found.perfect


def test_more_draws_of_the_refit_are_worth_more(fit: sy.Fit) -> None:
    change = sy.swap_prior(mu=sy.Normal(0, 0.9))
    level = float(fit.reweigh(change).prob("mu > 0").value)
    values = [fit.value_of_refit(change, "mu > 0", level, draws=n).value for n in (100, 10_000)]
    assert values[0] < values[1]


def test_nothing_is_said_where_no_error_can_be_relied_on(fit: sy.Fit) -> None:
    found = fit.value_of_refit(sy.swap_prior(mu=sy.Normal(12, 0.5)), "mu > 3", 0.5)
    assert math.isnan(found.right_now)
    assert math.isnan(found.value)
    assert "not known" in str(found)
    assert found.verdict.level == "refit"


@pytest.mark.parametrize(
    ("call", "error", "told"),
    [
        (lambda f: f.more_draws("mu", 0), sy.errors.ArgumentError, "positive"),
        (lambda f: f.more_draws("mu", -1.0), sy.errors.ArgumentError, "positive"),
        (lambda f: f.more_draws("mu", "small"), sy.errors.ArgumentTypeError, "a number"),
        (lambda f: f.more_draws("nu", 0.1), sy.errors.UnknownNameError, "mu"),
        (lambda f: f.more_draws("mu", 0.1, of="median"), sy.errors.ArgumentError, "'sd'"),
        (lambda f: f.more_draws({"a": "mu"}, 0.1), sy.errors.QuantityError, "one quantity"),
        (
            lambda f: f.value_of_refit(sy.power(prior=0.9), "mu > 0", 1.5),
            sy.errors.ArgumentError,
            "between 0 and 1",
        ),
        (
            lambda f: f.value_of_refit(sy.power(prior=0.9), "mu > 0", 0.5, draws=0),
            sy.errors.ArgumentError,
            "from 1 on",
        ),
    ],
)
def test_bad_input_is_told(fit: sy.Fit, call: object, error: type[Exception], told: str) -> None:
    with pytest.raises(error, match=told):
        call(fit)  # type: ignore[operator]
