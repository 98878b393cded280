"""Family 1, P1.1 to P1.3: one parameter, a conjugate prior swapped for another.

Base draws are S = 100,000 independent ones from the exact base posterior; the seed is
1000 + 10 x (number of the model) + (0, 1, 2 for a, b, c). A Monte Carlo comparison allows four
errors, false alarm 6.3e-5 each; the module makes about 90 of them, false alarm 0.6 % at a new set
of seeds. Reference values are good to 1e-9 or better, which counts for nothing beside that.
"""

from __future__ import annotations

import math
from typing import Any

import numpy as np
import pytest
from scipy import special

import steelyard as sy
from steelyard import weights

from . import reference
from .comparing import (
    assert_equal,
    assert_error_is_honest,
    assert_within_errors,
    plain_mean_error,
    plain_quantile_error,
    plain_sd_error,
)
from .one_parameter import SIZE, setting, sleep_posterior

_FINITE = ["P1.1a", "P1.1b", "P1.2a", "P1.2b", "P1.2c", "P1.3b"]
_INFINITE = ["P1.1c", "P1.3a"]
_SLEEP = ["P1.1a", "P1.1b", "P1.1c"]


def _quantiles(expected: dict[str, Any], which: str) -> tuple[list[float], list[float]]:
    names = [name for name in expected if name.startswith(f"{which}_q")]
    probs = [float(name.removeprefix(f"{which}_q")) for name in names]
    return probs, [reference.value(expected[name]) for name in names]


@pytest.mark.parametrize("identifier", _FINITE + _INFINITE)
def test_the_base_answer_is_the_old_posterior(identifier: str) -> None:
    case = setting(identifier)
    base, expected = case.fit.base, case.expected
    assert_within_errors(base.mean(case.name), reference.value(expected["base_mean"]))
    assert_within_errors(base.sd(case.name), reference.value(expected["base_sd"]))
    probs, quantiles = _quantiles(expected, "base")
    assert_within_errors(base.quantile(case.name, probs), quantiles)


@pytest.mark.parametrize("identifier", _FINITE)
def test_the_new_mean_is_within_its_reported_and_its_exact_error(identifier: str) -> None:
    case = setting(identifier)
    mean = case.fit.reweigh(case.change).mean(case.name)
    exact_error = reference.value(case.expected["weighted_mean_error_times_sqrtS"])
    first_order = exact_error / math.sqrt(SIZE)
    assert_within_errors(
        mean, reference.value(case.expected["new_mean"]), first_order_error=first_order
    )
    assert_error_is_honest(mean, plain_mean_error(case.values, case.log_ratio))
    # An estimated error has a finite variance of its own only below an index of 1/4. At the 0.35
    # of P1.1b the plain delta method gives 0.61 to 3.3 times the exact error (300 seeds).
    if reference.value(case.expected["tail_index_k_limit"]) <= 0.25:
        assert_error_is_honest(mean, first_order)


@pytest.mark.parametrize("identifier", _FINITE)
def test_the_new_sd_is_within_its_reported_error(identifier: str) -> None:
    case = setting(identifier)
    spread = case.fit.reweigh(case.change).sd(case.name)
    assert_within_errors(spread, reference.value(case.expected["new_sd"]))
    assert_error_is_honest(spread, plain_sd_error(case.values, case.log_ratio))


@pytest.mark.parametrize("identifier", _FINITE)
def test_the_new_quantiles_are_within_their_reported_errors(identifier: str) -> None:
    case = setting(identifier)
    probs, quantiles = _quantiles(case.expected, "new")
    found = case.fit.reweigh(case.change).quantile(case.name, probs)
    assert_within_errors(found, quantiles)
    # A quantile's error rests on the hundred or so draws between its two ends, hence is itself
    # uncertain by a tenth: 0.6 is four of those.
    densities = case.target.pdf(quantiles)
    exact = plain_quantile_error(case.values, case.log_ratio, np.array(quantiles), densities)
    assert_error_is_honest(found, exact, at_least=0.6)


@pytest.mark.parametrize("identifier", _FINITE)
def test_the_evidence_ratio_is_that_of_the_marginal_likelihoods(identifier: str) -> None:
    case = setting(identifier)
    ratio = case.fit.reweigh(case.change).log_evidence_ratio
    assert_within_errors(ratio, reference.value(case.expected["log_marginal_ratio_new_over_base"]))
    raw = np.exp(case.log_ratio)
    assert_error_is_honest(ratio, np.std(raw) / np.mean(raw) / math.sqrt(SIZE))


@pytest.mark.parametrize("identifier", _FINITE)
def test_effective_sizes_of_a_changed_prior_approach_their_limits(identifier: str) -> None:
    # 5 % at S = 100,000 up to a tail index of 0.25 and 15 % up to 0.4, as in family 5.
    case = setting(identifier)
    answer = case.fit.reweigh(case.change)
    light = reference.value(case.expected["tail_index_k_limit"]) <= 0.25
    for kind, size, limit in (
        ("variance", answer.effective_size, "limit_ess_fraction"),
        ("entropy", answer.entropy_size, "limit_perplexity_fraction"),
    ):
        expected = reference.value(case.expected[limit])
        raw = weights.effective_size(case.log_ratio, kind=kind)
        for found in (size, raw):
            assert abs(found / SIZE / expected - 1) < (0.05 if light else 0.15)


@pytest.mark.parametrize("identifier", _FINITE)
def test_a_change_with_finite_weight_variance_is_sound(identifier: str) -> None:
    case = setting(identifier)
    answer = case.fit.reweigh(case.change)
    assert answer.verdict.is_sound
    assert answer.mean(case.name).verdict.is_sound


@pytest.mark.parametrize("identifier", _INFINITE)
def test_a_change_with_infinite_weight_variance_is_not_sound_and_says_why(identifier: str) -> None:
    # The tail index is 0.79 and 0.57. The published limit on an estimated shape, 0.7, need not
    # see the second; algebra on the priors does, with the posterior matched by its moments. These
    # carry the only noise: 0.5 % of the index (300 seeds), of which 3 % are six.
    case = setting(identifier)
    index = reference.value(case.expected["tail_index_k_limit"])
    answer = case.fit.reweigh(case.change)
    assert answer.verdict.level < "sound"
    (reason,) = [r for r in answer.verdict.reasons if r.code == "prior_widened"]
    assert reason.level < "sound"
    assert "infinite" in reason.sentence
    assert abs(reason.figure / index - 1) < 0.03
    assert answer.mean(case.name).verdict.level < "sound"


# Probability that the difference is positive: all of them near one.

_EVENT = "difference > 0"


@pytest.mark.parametrize(
    ("identifier", "which"), [("P1.1c", "base"), ("P1.1a", "base"), ("P1.1b", "new")]
)
def test_a_probability_near_one_is_within_its_error_and_judged_by_the_draws_outside(
    identifier: str, which: str
) -> None:
    case = setting(identifier)
    answer = case.fit.base if which == "base" else case.fit.reweigh(case.change)
    found = answer.prob(_EVENT)
    exact = reference.value(case.expected[f"{which}_prob_positive"])
    expected_outside = SIZE * (1 - exact)
    if expected_outside > 100:
        assert_within_errors(found, exact)
        assert found.verdict.is_sound
    else:
        # Three draws are expected outside; a Poisson number above 15 has probability 1e-6.
        assert 1 - found.value < 15 / SIZE
        assert found.verdict.level < "sound"
        assert "event_draws" in {reason.code for reason in found.verdict.reasons}


# Fixed quantile draws: everything deterministic, to 1e-8 of the reference.


def _grid(identifier: str) -> tuple[Any, Any, dict[str, Any]]:
    inputs = reference.case(identifier)["inputs"]
    mean, sd = sleep_posterior(inputs, "base")
    draws = mean + sd * special.ndtri((np.arange(1, 1025) - 0.5) / 1024)
    fit = sy.Fit(
        {"difference": draws},
        prior={"difference": sy.Normal(*inputs["base_prior"])},
        ordered=False,
    )
    answer = fit.reweigh(sy.swap_prior(difference=sy.Normal(*inputs["new_prior"])))
    # The same log ratio written out, complete densities.
    (m0, s0), (m1, s1) = inputs["base_prior"], inputs["new_prior"]
    log_ratio = 0.5 * ((draws - m0) / s0) ** 2 - 0.5 * ((draws - m1) / s1) ** 2 - math.log(s1 / s0)
    return answer, (draws, log_ratio), reference.case(identifier)["expected"]["grid_1024"]


@pytest.mark.parametrize("identifier", _SLEEP)
def test_raw_weights_of_fixed_quantile_draws_are_those_of_the_reference(identifier: str) -> None:
    _, (draws, log_ratio), expected = _grid(identifier)
    share = np.exp(weights.normalise(log_ratio))
    mean = np.sum(share * draws)
    reference.assert_equal_within(mean, expected["weighted_mean"])
    reference.assert_equal_within(
        np.sqrt(np.sum(share * (draws - mean) ** 2)), expected["weighted_sd"]
    )
    reference.assert_equal_within(weights.effective_size(log_ratio), expected["ess"])
    reference.assert_equal_within(
        weights.effective_size(log_ratio, kind="entropy"), expected["perplexity"]
    )
    reference.assert_equal_within(weights.largest_share(log_ratio), expected["max_weight"])
    reference.assert_equal_within(
        weights.log_sum_exp(log_ratio) - math.log(1024), expected["log_mean_weight"]
    )


@pytest.mark.parametrize("identifier", _SLEEP)
def test_the_answer_from_fixed_quantile_draws_is_smoothed_as_in_the_reference(
    identifier: str,
) -> None:
    answer, (_, log_ratio), expected = _grid(identifier)
    reference.assert_equal_within(answer.tail_shape, expected["smoothing_k"])
    reference.assert_equal_within(answer.effective_size, expected["smoothed_ess"])
    mean = answer.mean("difference").value
    reference.assert_equal_within(mean, expected["smoothed_weighted_mean"])
    by_hand = weights.smooth(log_ratio)
    reference.assert_equal_within(by_hand.tail_shape, expected["smoothing_k"])
    # The two routes share the smoothing but not the densities: equal to rounding, 1e-10.
    assert_equal(answer.log_weights, by_hand.log_weights, rtol=0, atol=1e-10)


@pytest.mark.parametrize("identifier", _SLEEP)
def test_the_tail_of_fixed_quantile_draws_has_the_reference_length(identifier: str) -> None:
    _, (_, log_ratio), expected = _grid(identifier)
    smoothed = weights.smooth(log_ratio)
    moved = smoothed.log_weights - log_ratio
    changed = np.abs(moved - moved[np.argmin(log_ratio)]) > 1e-9
    changed[np.argmax(log_ratio)] = True
    reference.assert_equal_within(np.sum(changed), expected["smoothing_tail_size"])
