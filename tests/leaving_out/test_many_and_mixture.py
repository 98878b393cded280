"""Very many observations by a sample of them, and draws from the mixture of all deletions."""

from __future__ import annotations

import numpy as np
import pytest
from scipy import stats

import steelyard as sy
from steelyard.leaving_out import deletion_mixture, leave_out, sampled_from

from . import cases
from .models import Array, normal_log_density

SEED = 66


def _many(count: int, draws: int = 1000) -> tuple[object, Array]:
    rng = np.random.default_rng(SEED)
    y = 8 + 0.5 * rng.normal(size=count)
    mu = y.mean() + 0.5 / np.sqrt(count) * rng.normal(size=draws)
    sd = 0.5 * np.exp(rng.normal(size=draws) / np.sqrt(2 * count))
    loglik = normal_log_density(y, mu[:, None], sd[:, None] ** 2)
    return sy.Fit({"mu": mu, "sd": sd}, loglik=loglik, ordered=False)._record, loglik


def test_a_sample_gives_the_total_within_its_own_error() -> None:
    """200 samples of 50 out of 600, with a surrogate that is off by normal noise.

    The total of all lies within 1.96 errors 90 to 99.5 % of times: a share of 200 has a standard
    error of 1.5 % at 95 %, three of them on either side.
    """
    record, _ = _many(600)
    whole = leave_out(record)
    rough = whole.by_group.value + 0.3 * np.random.default_rng(SEED).normal(size=600)
    inside = []
    for seed in range(200):
        left = leave_out(record, sample=50, rng=seed, surrogate=rough)
        assert left.sampled is not None
        inside.append(
            abs(left.log_score.value - whole.log_score.value) <= 1.96 * left.sampled.error
        )
    assert 0.90 <= np.mean(inside) <= 0.995


def test_the_answer_prints_what_was_sampled() -> None:
    record, _ = _many(600)
    left = leave_out(record, sample=50, rng=1)
    assert "50 of 600 groups drawn at random" in str(left)
    assert "groups_sampled" in {r.code for r in left.verdict.reasons}
    assert left.by_group.value.shape == (50,)
    whole = leave_out(record)
    np.testing.assert_array_equal(left.by_group.value, whole.by_group.value[left.sampled.positions])
    # The surrogate is close: drawing adds far less than plain expansion would, and than the
    # Monte Carlo error.
    plain = 600 * np.std(left.by_group.value, ddof=1) / np.sqrt(50)
    assert left.sampled.error < 0.01 * plain
    assert left.sampled.error < left.log_score.error
    # Its Monte Carlo error is that of all the data, not of the sample.
    assert left.log_score.error == pytest.approx(whole.log_score.error, rel=0.2)
    assert left.sampling_error == pytest.approx(whole.sampling_error, rel=0.02)


def test_a_given_surrogate_spares_the_pass_over_all_data() -> None:
    record, loglik = _many(600)
    left = leave_out(record, sample=600, rng=1, surrogate=np.zeros(600))
    assert left.log_score.value == pytest.approx(leave_out(record).log_score.value)
    assert left.sampled.error == 0
    rough = leave_out(record, sample=100, rng=1, surrogate=loglik.mean(axis=0))
    assert abs(rough.log_score.value - leave_out(record).log_score.value) < 4 * rough.sampled.error


def test_the_sample_is_that_of_the_seed_and_a_sample_as_large_as_all_is_all() -> None:
    record, _ = _many(100)
    one, two = (leave_out(record, sample=20, rng=9).sampled for _ in range(2))
    np.testing.assert_array_equal(one.positions, two.positions)
    every = leave_out(record, sample=100, rng=1)
    assert every.log_score.value == pytest.approx(leave_out(record).log_score.value)


def _mixture_draws(y: Array, scale: float, count: int) -> tuple[Array, Array]:
    """
    Exact draws from ``posterior · Σ_i exp(−L_i)`` for a normal mean, flat prior, sd known.

    Each summand is the posterior without one reading, times its own constant.
    """
    rng = np.random.default_rng(SEED)
    n = len(y)
    centre = (y.sum() - y) / (n - 1)
    # ∫ p(μ | y)/p(y_i | μ) dμ = 1/p(y_i | y_-i).
    log_constant = -stats.norm.logpdf(y, centre, scale * np.sqrt(n / (n - 1)))
    share = np.exp(log_constant - log_constant.max())
    which = rng.choice(n, size=count, p=share / share.sum())
    mu = centre[which] + scale / np.sqrt(n - 1) * rng.normal(size=count)
    return mu, normal_log_density(y, mu[:, None], scale**2)


def test_draws_from_the_mixture_of_deletions_serve_even_an_outlier() -> None:
    """An outlier eight sds off: draws of the posterior fail, the mixture's do not."""
    y = np.append(np.random.default_rng(SEED + 1).normal(size=12), 8.0)
    exact = stats.norm.logpdf(y, (y.sum() - y) / 12, np.sqrt(13 / 12))
    mu, loglik = _mixture_draws(y, 1.0, 4000)
    record = sy.Fit({"mu": mu}, loglik=loglik, ordered=False)._record
    left = leave_out(sampled_from(record, "deletions"))
    assert np.all(np.abs(left.by_group.value - exact) <= 4 * left.by_group.error)
    assert abs(left.log_score.value - exact.sum()) <= 4 * left.log_score.error
    # Weights exp(−L_i)/Σ_j exp(−L_j) are below one: the tail is bounded.
    assert left.tail_shape[12] < 0.3
    posterior = y.mean() + np.random.default_rng(2).normal(size=4000) / np.sqrt(13)
    plain = leave_out(
        sy.Fit(
            {"mu": posterior}, loglik=normal_log_density(y, posterior[:, None], 1.0), ordered=False
        )._record
    )
    assert left.by_group.error[12] < plain.by_group.error[12] / 2


def test_the_base_of_mixture_draws_is_weighed_back_to_the_posterior() -> None:
    y = np.append(np.random.default_rng(SEED + 1).normal(size=12), 3.0)
    mu, loglik = _mixture_draws(y, 1.0, 20_000)
    record = sampled_from(sy.Fit({"mu": mu}, loglik=loglik, ordered=False)._record, "deletions")
    from steelyard.answers import base_answer

    mean = base_answer(record).mean("mu")
    assert abs(mean.value - y.mean()) <= 4 * mean.error
    assert sampled_from(record, "posterior") is record


def test_what_a_sampler_adds_is_the_log_sum_of_deletion_ratios() -> None:
    y = cases.data("P2.5", "y")[:7]
    values = -np.outer([1.0, 2.0], y)
    np.testing.assert_allclose(
        deletion_mixture(values), np.log(np.exp(-values).sum(axis=1)), rtol=1e-14
    )
