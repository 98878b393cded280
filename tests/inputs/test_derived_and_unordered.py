"""Quantities that are no parameters, and draws without time order."""

from __future__ import annotations

import numpy as np

import steelyard as sy
from steelyard.errors import ArgumentError, ArgumentTypeError, DrawsError, UnknownNameError

from .scenario import (
    CHAIN,
    LOGLIK,
    MU,
    OTHER_DATA,
    PRIOR,
    RATE,
    assert_same_answers,
    plain_draws,
    refused,
)


def _worst(draws: sy.Draws) -> np.ndarray:
    return np.asarray(draws["rate"].max(axis=-1))


def test_a_derived_quantity_answers_alike_whether_stored_or_computed() -> None:
    stored = {**plain_draws(), "worst": RATE.max(axis=-1)}
    fit = sy.Fit(stored, prior=PRIOR, loglik=LOGLIK, derived=["worst"])
    computed = sy.Fit(plain_draws(), prior=PRIOR, loglik=LOGLIK, derived={"worst": _worst})
    assert_same_answers(computed, fit, OTHER_DATA, ("worst", "mu"))


def test_one_derived_name_needs_no_list() -> None:
    fits = [sy.Fit(plain_draws(), derived=given) for given in ("rate", ["rate"])]
    assert_same_answers(*(sy.Fit(f.draws, prior=PRIOR, derived="rate") for f in fits))


def test_derived_quantities_that_cannot_be_are_refused() -> None:
    with refused(UnknownNameError, "derived", "'worst'", "{name: callable}"):
        sy.Fit(plain_draws(), derived=["worst"])
    with refused(ArgumentError, "derived['mu']", "not among the draws"):
        sy.Fit(plain_draws(), derived={"mu": _worst})
    with refused(ArgumentTypeError, "derived['worst']", "a callable"):
        sy.Fit(plain_draws(), derived={"worst": RATE})  # type: ignore[dict-item]
    with refused(DrawsError, "derived['worst']", "finite"):
        sy.Fit(plain_draws(), derived={"worst": lambda draws: np.full(len(draws["mu"]), np.nan)})


def _walk() -> np.ndarray:
    # Autoregression of 0.9: draws in order are worth (1 − 0.9)/(1 + 0.9), a nineteenth, of
    # independent ones.
    rng = np.random.default_rng(31)
    walk = np.zeros((4, 2000))
    walk[:, 0] = rng.normal(size=4)
    for i in range(1, walk.shape[1]):
        walk[:, i] = 0.9 * walk[:, i - 1] + np.sqrt(1 - 0.81) * rng.normal(size=4)
    return walk


def test_draws_without_order_have_the_errors_of_independent_draws() -> None:
    walk = _walk()
    ordered = sy.Fit({"mu": walk}).base.mean("mu").error
    unordered = sy.Fit({"mu": walk}, ordered=False).base.mean("mu").error
    independent = walk.std() / np.sqrt(walk.size)
    # Equal but for a divisor of n or n − 1, n = 8000.
    np.testing.assert_allclose(unordered, independent, rtol=1 / walk.size)
    # √19 = 4.4 in theory; the estimate of the error from 8000 such draws is within a third.
    assert 3.0 < ordered / unordered < 6.0


def test_the_order_of_unordered_draws_does_not_change_their_errors() -> None:
    walk = _walk().reshape(-1)
    mixed = np.random.default_rng(32).permutation(walk)
    errors = [sy.Fit({"mu": x}, ordered=False).base.mean("mu").error for x in (walk, mixed)]
    np.testing.assert_allclose(*errors, rtol=1e-12)  # rounding of sums in another order


def test_order_is_yes_or_no() -> None:
    with refused(ArgumentTypeError, "ordered", "'no'"):
        sy.Fit({"mu": MU}, ordered="no")  # type: ignore[arg-type]


def test_unordered_draws_of_several_chains_need_no_sorting_when_the_chain_is_left_out() -> None:
    order = np.random.default_rng(33).permutation(len(CHAIN))
    with refused(DrawsError, "chain", "ordered=False"):
        sy.Fit({"mu": MU.reshape(-1)[order]}, chain=CHAIN[order])
    fit = sy.Fit({"mu": MU.reshape(-1)[order]}, ordered=False)
    assert fit.draws.chains == 1
