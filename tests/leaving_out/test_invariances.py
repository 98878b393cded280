"""What must not matter: constants of the likelihood, the order of observations and of draws."""

from __future__ import annotations

import numpy as np
import pytest
from hypothesis import given, settings
from hypothesis import strategies as st

import steelyard as sy
from steelyard.leaving_out import leave_out

from .models import Array

SEED = 69


def _setup(draws: int = 200, count: int = 12) -> tuple[Array, Array]:
    rng = np.random.default_rng(SEED)
    mu = 0.2 * rng.normal(size=draws)
    return mu, -0.5 * (rng.normal(size=count) - mu[:, None]) ** 2


@settings(max_examples=30, deadline=None, derandomize=True)
@given(constant=st.floats(-1e4, 1e4))
def test_a_constant_in_each_log_likelihood_moves_the_score_by_just_that(constant: float) -> None:
    """Sums of numbers near 1e4 keep twelve digits."""
    mu, loglik = _setup()
    plain = leave_out(sy.Fit({"mu": mu}, loglik=loglik)._record)
    moved = leave_out(sy.Fit({"mu": mu}, loglik=loglik + constant)._record)
    gap = moved.by_group.value - plain.by_group.value
    np.testing.assert_allclose(gap, constant, rtol=1e-10, atol=1e-9)
    np.testing.assert_allclose(moved.by_group.error, plain.by_group.error, rtol=1e-6)
    np.testing.assert_allclose(moved.optimism.value, plain.optimism.value, rtol=1e-6, atol=1e-7)
    np.testing.assert_allclose(
        moved.influence("mu").value, plain.influence("mu").value, rtol=1e-6, atol=1e-9
    )


@settings(max_examples=20, deadline=None, derandomize=True)
@given(seed=st.integers(0, 2**31))
def test_another_order_of_observations_orders_the_figures_alike(seed: int) -> None:
    mu, loglik = _setup()
    order = np.random.default_rng(seed).permutation(12)
    plain = leave_out(sy.Fit({"mu": mu}, loglik=loglik)._record)
    mixed = leave_out(sy.Fit({"mu": mu}, loglik=loglik[:, order])._record)
    np.testing.assert_array_equal(mixed.by_group.value, plain.by_group.value[order])
    # The series is summed in another order: rounding only.
    assert mixed.log_score.error == pytest.approx(plain.log_score.error, rel=1e-10)


@settings(max_examples=20, deadline=None, derandomize=True)
@given(seed=st.integers(0, 2**31))
def test_unordered_draws_may_come_in_any_order(seed: int) -> None:
    mu, loglik = _setup()
    order = np.random.default_rng(seed).permutation(200)
    plain = leave_out(sy.Fit({"mu": mu}, loglik=loglik, ordered=False)._record)
    mixed = leave_out(sy.Fit({"mu": mu[order]}, loglik=loglik[order], ordered=False)._record)
    np.testing.assert_allclose(mixed.by_group.value, plain.by_group.value, rtol=1e-12)
    np.testing.assert_allclose(mixed.by_group.error, plain.by_group.error, rtol=1e-9)
    assert mixed.log_score.error == pytest.approx(plain.log_score.error, rel=1e-9)


def test_nothing_that_was_passed_in_is_changed_and_nothing_given_out_can_be() -> None:
    mu, loglik = _setup()
    before = loglik.copy()
    left = leave_out(sy.Fit({"mu": mu}, loglik=loglik)._record)
    left.influence("mu")
    np.testing.assert_array_equal(loglik, before)
    for given_out in (left.by_group.value, left.in_sample, left.tail_shape, left.effective_size):
        with pytest.raises(ValueError, match="read-only"):
            given_out[0] = 0.0
