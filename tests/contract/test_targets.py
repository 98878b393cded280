"""A change edits the target: edits commute, factors multiply, and target minus base is the sum.

Sums of a few dozen terms of size at most ten are compared at 1e-11.
"""

from __future__ import annotations

import itertools
from typing import Any

import numpy as np
import pytest
from scipy import stats

import steelyard as sy

Arrays = dict[str, np.ndarray]
CLOSE = 1e-11


def _bits(fit: sy.Fit, change: sy.Change) -> tuple[bytes, list[tuple[str, bytes]]]:
    answer = fit.reweigh(change)
    return answer.log_weights.tobytes(), sorted((k, v.tobytes()) for k, v in answer.terms.items())


def _ratio(fit: sy.Fit, change: sy.Change) -> np.ndarray:
    return np.sum(list(fit.reweigh(change).terms.values()), axis=0)


@pytest.fixture(scope="module")
def edits(loglik: Arrays) -> dict[str, sy.Change]:
    rng = np.random.default_rng(20_261_234)
    return {
        "swap prior": sy.swap_prior(tau=sy.HalfCauchy(0.05)),
        "swap likelihood": sy.swap_loglik({"gauge A": 0.9 * loglik["gauge A"]}),
        "drop a term": sy.drop("gauge B"),
        "drop observations": sy.drop({"gauge A": [0, 3]}),
        "add": sy.add({"spring": 0.1 * rng.normal(size=(4, 100, 2))}),
        "weigh a term": sy.weigh_data({"gauge A": 0.7}),
        "weigh observations": sy.weigh_data({"gauge B": rng.uniform(0, 2, size=9)}),
        "power of the prior": sy.power(prior=0.3),
        "power of one prior": sy.power(prior={"mu": 1.7}),
        "power of the likelihood": sy.power(likelihood=0.9),
        "a ratio": sy.log_ratio(0.1 * rng.normal(size=400)),
        "another ratio": sy.log_ratio(lambda d: 0.3 * d["mu"]),
    }


def test_edits_commute_to_the_last_bit_in_pairs(fit: sy.Fit, edits: dict[str, sy.Change]) -> None:
    for one, other in itertools.combinations(edits.values(), 2):
        assert _bits(fit, one & other) == _bits(fit, other & one), (one, other)


def test_edits_commute_to_the_last_bit_in_any_order(
    fit: sy.Fit, edits: dict[str, sy.Change]
) -> None:
    rng = np.random.default_rng(20_261_235)
    changes = list(edits.values())
    want = _bits(fit, _joined(changes))
    for _ in range(20):
        assert _bits(fit, _joined([changes[i] for i in rng.permutation(len(changes))])) == want


@pytest.mark.parametrize(
    "three",
    [
        [sy.weigh_data({"gauge A": f}) for f in (0.1, 0.3, 0.7)],
        [sy.power(prior=f) for f in (0.1, 0.3, 0.7)],
        [sy.power(likelihood=f) for f in (1.1, 1.3, 0.7)],
        [sy.log_ratio(np.random.default_rng(s).normal(size=400)) for s in range(3)],
        [
            sy.weigh_data({"gauge A": np.linspace(0.1, 1.7, 9)}),
            sy.weigh_data({"gauge A": np.linspace(0.3, 1.1, 9)}),
            sy.power(likelihood=0.7),
        ],
    ],
    ids=["weights", "prior powers", "likelihood powers", "ratios", "weights by observation"],
)
def test_three_factors_or_ratios_commute_to_the_last_bit(
    fit: sy.Fit, three: list[sy.Change]
) -> None:
    found = {_bits(fit, a & b & c)[0] for a, b, c in itertools.permutations(three)}
    assert len(found) == 1


def _joined(changes: list[sy.Change]) -> sy.Change:
    whole = changes[0]
    for change in changes[1:]:
        whole = whole & change
    return whole


def _log_prior(draws: Arrays) -> Arrays:
    mu, tau = draws["mu"][..., None], draws["tau"][..., None]
    return {
        "rate": stats.norm(mu, tau).logpdf(draws["rate"]).sum(2),
        "mu": stats.norm(0.1, 0.1).logpdf(draws["mu"]),
        "tau": stats.halfnorm(0, 0.05).logpdf(draws["tau"]),
    }


def test_single_edits_are_the_ratios_of_methods_section_four(
    fit: sy.Fit, draws: Arrays, loglik: Arrays
) -> None:
    log_prior = _log_prior(draws)
    a, b = loglik["gauge A"], loglik["gauge B"]
    factors = np.linspace(0, 2, 9)
    new = 0.1 * np.random.default_rng(1).normal(size=(4, 100, 3))
    cauchy = stats.halfcauchy(0, 0.05).logpdf(draws["tau"])
    cases: dict[str, tuple[sy.Change, np.ndarray]] = {
        "swap prior": (sy.swap_prior(tau=sy.HalfCauchy(0.05)), cauchy - log_prior["tau"]),
        "swap likelihood": (sy.swap_loglik({"gauge A": 0.8 * a}), -0.2 * a.sum(2)),
        "drop": (sy.drop({"gauge A": [1, 5]}), -a[..., [1, 5]].sum(2)),
        "add": (sy.add({"new": new}), new.sum(2)),
        "weights": (sy.weigh_data({"gauge B": factors}), ((factors - 1) * b).sum(2)),
        "prior power": (sy.power(prior=0.4), -0.6 * sum(log_prior.values())),
        "likelihood power": (sy.power(likelihood=0.4), -0.6 * (a.sum(2) + b.sum(2))),
        "both powers": (sy.power(0.4, 0.5), -0.6 * sum(log_prior.values()) - 0.5 * (a + b).sum(2)),
        "ratio": (sy.log_ratio(draws["mu"]), draws["mu"]),
    }
    for kind, (change, want) in cases.items():
        np.testing.assert_allclose(_ratio(fit, change), want, atol=CLOSE, err_msg=kind)


def test_raised_noise_is_the_normal_density_with_the_larger_sd(draws: Arrays) -> None:
    readings = np.linspace(0.05, 0.15, 9)

    def loglik(sd: Any) -> np.ndarray:
        return stats.norm(draws["rate"], sd).logpdf(readings)

    by_draw = 0.5 + draws["tau"]
    for sd, values in (
        (0.4, loglik(0.4)),
        (np.linspace(0.3, 0.5, 9), loglik(np.linspace(0.3, 0.5, 9))),
        ("tau", loglik(draws["tau"][..., None])),
        (lambda d: 0.5 + d["tau"], loglik(by_draw[..., None])),
    ):
        wide = {"tau": draws["tau"][..., None]}.get(sd, sd) if isinstance(sd, str) else sd
        wide = by_draw[..., None] if callable(wide) else wide
        fit = sy.Fit(draws, loglik={"gauge A": values})
        got = _ratio(fit, sy.raise_noise("gauge A", 1.25, sd))
        want = (loglik(1.25 * wide) - values).sum(2)
        # 1e-9: with sds of 0.005 single terms reach 1e4.
        np.testing.assert_allclose(got, want, rtol=1e-10, atol=1e-9)


def test_a_swap_and_a_drop_of_one_term_drop_from_the_new_one(fit: sy.Fit, loglik: Arrays) -> None:
    new = 0.8 * loglik["gauge A"] - 0.1
    for change in (
        sy.swap_loglik({"gauge A": new}) & sy.drop({"gauge A": [2]}),
        sy.drop({"gauge A": [2]}) & sy.swap_loglik({"gauge A": new}),
    ):
        want = np.delete(new, 2, axis=2).sum(2) - loglik["gauge A"].sum(2)
        np.testing.assert_allclose(_ratio(fit, change), want, atol=CLOSE)


def test_a_swap_and_a_power_of_one_prior_are_the_power_of_the_new_one(
    fit: sy.Fit, draws: Arrays
) -> None:
    new = stats.halfcauchy(0, 0.05).logpdf(draws["tau"])
    for change in (
        sy.swap_prior(tau=sy.HalfCauchy(0.05)) & sy.power(prior={"tau": 0.5}),
        sy.power(prior={"tau": 0.5}) & sy.swap_prior(tau=sy.HalfCauchy(0.05)),
    ):
        want = 0.5 * new - _log_prior(draws)["tau"]
        np.testing.assert_allclose(_ratio(fit, change), want, atol=CLOSE)


def test_a_power_takes_added_data_and_weights_with_it(fit: sy.Fit, loglik: Arrays) -> None:
    new = 0.1 * np.random.default_rng(2).normal(size=(4, 100, 3))
    change = sy.power(likelihood=0.5) & sy.add({"new": new}) & sy.weigh_data({"gauge A": 0.5})
    want = 0.5 * new.sum(2) - 0.75 * loglik["gauge A"].sum(2) - 0.5 * loglik["gauge B"].sum(2)
    np.testing.assert_allclose(_ratio(fit, change), want, atol=CLOSE)


def test_factors_multiply_and_a_drop_is_a_factor_of_zero(fit: sy.Fit, loglik: Arrays) -> None:
    a = loglik["gauge A"]
    twice = sy.weigh_data({"gauge A": 0.5}) & sy.weigh_data({"gauge A": 0.4})
    np.testing.assert_allclose(_ratio(fit, twice), -0.8 * a.sum(2), atol=CLOSE)
    weights = np.r_[0, np.ones(8)]
    drop = sy.drop({"gauge A": [0]})
    assert _bits(fit, drop) == _bits(fit, sy.weigh_data({"gauge A": weights}))
    assert _bits(fit, drop) == _bits(fit, drop & drop)
    assert _bits(fit, sy.drop("gauge A")) == _bits(fit, sy.power(likelihood={"gauge A": 0}))
    both = sy.drop({"gauge A": [0]}) & sy.weigh_data({"gauge A": 3})
    want = 2 * a[..., 1:].sum(2) - a[..., 0]
    np.testing.assert_allclose(_ratio(fit, both), want, atol=CLOSE)


def test_a_drop_does_not_touch_what_is_minus_infinity_elsewhere(draws: Arrays) -> None:
    # Σ (a − 1) L over what changed alone: 0·(−inf) is no weight, not NaN.
    values = np.zeros((4, 100, 3))
    values[1, 2, 0] = -np.inf
    fit = sy.Fit(draws, loglik=values - 1.0)
    np.testing.assert_allclose(_ratio(fit, sy.drop([2])), np.ones((4, 100)), atol=CLOSE)


def test_terms_add_up_to_the_log_weights(answer: sy.Answer, fit: sy.Fit) -> None:
    assert list(answer.terms) == ["prior: tau", "likelihood: gauge B"]
    raw = fit.reweigh(answer.change, smooth=False)  # type: ignore[arg-type]
    total = sum(raw.terms.values())
    np.testing.assert_allclose(raw.log_weights, total - np.log(np.exp(total).sum()), atol=CLOSE)
    with pytest.raises(TypeError):
        answer.terms["mine"] = 0  # type: ignore[index]


def test_base_log_weights_enter_every_target(draws: Arrays, loglik: Arrays) -> None:
    own = np.random.default_rng(3).normal(size=(4, 100))
    fit = sy.Fit(draws, loglik=loglik, log_weights=own - 700)
    np.testing.assert_allclose(fit.base.log_weights, own - np.log(np.exp(own).sum()), atol=CLOSE)
    answer = fit.reweigh(sy.drop("gauge B"), smooth=False)
    total = own - loglik["gauge B"].sum(2)
    np.testing.assert_allclose(answer.log_weights, total - np.log(np.exp(total).sum()), atol=CLOSE)
    flat = sy.Fit(draws, loglik=loglik, log_weights=np.full(400, -3.0))
    assert np.ptp(flat.base.log_weights) == 0


def test_a_constant_in_a_ratio_changes_the_evidence_and_nothing_else(fit: sy.Fit) -> None:
    ratio = np.random.default_rng(4).normal(size=400)
    one, other = fit.reweigh(sy.log_ratio(ratio)), fit.reweigh(sy.log_ratio(ratio + 1e5))
    # 1e-9: sixteen digits of 1e5 leave eleven for the rest.
    np.testing.assert_allclose(one.log_weights, other.log_weights, atol=1e-9)
    gap = other.log_evidence_ratio.value - one.log_evidence_ratio.value
    assert gap == pytest.approx(1e5, abs=1e-9)


def test_changes_say_what_they_change() -> None:
    change = (
        sy.swap_prior(tau=sy.HalfCauchy(0.05)) & sy.drop({"gauge A": [0, 4]}) & sy.power(prior=0.5)
    )
    for part in ("tau", "HalfCauchy(0.05)", "gauge A", "0, 4", "0.5"):
        assert part in str(change)
        assert part in repr(change)


def test_changes_are_frozen_and_serve_more_than_one_fit(fit: sy.Fit, draws: Arrays) -> None:
    change = sy.power(prior=0.5)
    with pytest.raises(AttributeError):
        change.edits = ()  # type: ignore[misc]
    before = _bits(fit, change)
    sy.Fit(draws, {"mu": sy.Normal(0, 1)}).reweigh(change)
    assert _bits(fit, change) == before


def test_a_change_keeps_no_reference_to_a_list_that_is_altered_later(fit: sy.Fit) -> None:
    factors = np.ones(9)
    positions = [0]
    weigh, drop = sy.weigh_data({"gauge A": factors}), sy.drop({"gauge A": positions})
    before = _bits(fit, drop)
    factors[:] = 0.0
    positions.append(1)
    assert "no_change" in {r.code for r in fit.reweigh(weigh).verdict.reasons}
    assert _bits(fit, drop) == before
