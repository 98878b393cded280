"""Changes that change nothing, or nothing but the last digits, and the base itself."""

from __future__ import annotations

import numpy as np
import pytest
from scipy import stats

import steelyard as sy

Arrays = dict[str, np.ndarray]

NO_CHANGES = {
    "nothing": sy.power(),
    "the same prior": sy.swap_prior(mu=sy.Normal(0.1, 0.1)),
    "powers of one": sy.power(1, 1.0),
    "factors of one": sy.weigh_data({"gauge A": np.ones(9)}),
    "factors that cancel": sy.power(likelihood=2) & sy.power(likelihood=0.5),
    "a ratio of zero": sy.log_ratio(np.zeros(400)),
    "noise as it was": sy.raise_noise("gauge A", 1, 0.1),
    "ratios that cancel": sy.log_ratio(np.arange(400.0)) & sy.log_ratio(-np.arange(400.0)),
    "an addition of nothing": sy.add({"new": np.zeros((4, 100, 2))}),
}


@pytest.mark.parametrize("kind", NO_CHANGES)
def test_a_change_equal_to_the_base_answers_with_the_reason_no_change(
    fit: sy.Fit, kind: str
) -> None:
    answer = fit.reweigh(NO_CHANGES[kind])
    assert "no_change" in {r.code for r in answer.verdict.reasons}
    assert answer.verdict.level == "sound"
    assert answer.log_weights.tobytes() == fit.base.log_weights.tobytes()
    table, base = answer.table(), fit.base.table()
    assert all(table[name] == base[name] for name in base.columns)
    assert set(table["shift"]) == {0.0}
    shift = answer.shift("rate")
    assert np.array_equal(shift.value, np.zeros(9))
    assert np.array_equal(shift.error, np.zeros(9))
    assert dict(answer.terms) == {}


def test_the_same_likelihood_again_is_no_change(fit: sy.Fit, loglik: Arrays) -> None:
    answer = fit.reweigh(sy.swap_loglik({"gauge A": loglik["gauge A"].copy()}))
    assert "no_change" in {r.code for r in answer.verdict.reasons}


def test_an_equal_prior_of_another_library_is_sound_whatever_its_last_digits(
    draws: Arrays,
) -> None:
    # Target minus base is rounding (1e-16) and nothing in it is to be judged. Over 30 sets of
    # draws there is no chance in it: a verdict on such noise fails in a quarter of them.
    for seed in range(30):
        mu = np.random.default_rng(seed).normal(size=(4, 100))
        fit = sy.Fit({"mu": mu}, {"mu": sy.Normal(0.1, 2)})
        for equal in (stats.norm(0.1, 2), lambda d: stats.norm(0.1, 2).logpdf(d["mu"])):
            verdict = fit.reweigh(sy.swap_prior(mu=equal)).verdict
            assert verdict.level == "sound", (seed, str(verdict))


def test_a_term_that_moves_only_in_its_last_digits_is_sound() -> None:
    for seed in range(30):
        rng = np.random.default_rng(seed)
        mu, loglik = rng.normal(size=(4, 100)), rng.normal(size=(4, 100, 9))
        fit = sy.Fit({"mu": mu}, loglik=loglik)
        verdict = fit.reweigh(sy.swap_loglik(loglik * (1 + 1e-15))).verdict
        assert verdict.level == "sound", (seed, str(verdict))


def test_the_base_is_the_answer_without_a_change(fit: sy.Fit, draws: Arrays) -> None:
    base = fit.base
    assert base is fit.base
    assert base.change is None
    assert dict(base.terms) == {}
    # 1e-12 relative: an exponential of a logarithm.
    assert base.weights == pytest.approx(np.full((4, 100), 1 / 400), rel=1e-12)
    assert base.effective_size == pytest.approx(400, rel=1e-12)
    assert base.entropy_size == pytest.approx(400, rel=1e-12)
    assert base.largest_share == pytest.approx(1 / 400, rel=1e-12)
    assert base.tail_shape == -np.inf
    assert base.mean("mu").value == pytest.approx(draws["mu"].mean(), abs=1e-14)
    assert "no_change" not in {r.code for r in base.verdict.reasons}
