"""Family 6: exact variances, bounds and inclusion probabilities of the resampling methods.

4,000 repetitions a method, seeds below. A mean is held to five of its errors, a variance to five
of the errors that the fourth moment gives it (and 25 v/R, the second order, where a two-valued
count leaves none): false alarm 6e-7 a comparison, some 150 of them.
"""

from __future__ import annotations

import functools
from fractions import Fraction
from typing import Any

import numpy as np
import pytest
from numpy.typing import NDArray
from scipy import stats

from steelyard import weights

from . import reference

Array = NDArray[np.float64]
REPEATS = 4000
CASES = pytest.mark.parametrize("identifier", ["P6.1", "P6.2", "P6.3"])
METHODS = pytest.mark.parametrize("method", ["multinomial", "residual", "stratified", "systematic"])


@functools.cache
def _counts(identifier: str, method: str) -> Array:
    """How often each draw was chosen, ``(repetition, draw)``."""
    inputs = reference.case(identifier)["inputs"]
    share = np.array([float(Fraction(w)) for w in inputs["weights"]])
    rng = np.random.default_rng(600 + len(method))
    return np.array(
        [
            np.bincount(
                weights.resample(np.log(share), inputs["n"], method, rng=rng), minlength=len(share)
            )
            for _ in range(REPEATS)
        ],
        dtype=float,
    )


def _hold_variance(found: Array, exact: Any) -> None:
    exact = np.asarray(exact)
    centred = found - found.mean(axis=0)
    variance = (centred**2).sum(axis=0) / (REPEATS - 1)
    fourth = (centred**4).mean(axis=0)
    # 1e-9: exact values such as 3e-16 stand for 0.
    room = 5 * np.sqrt(np.maximum(fourth - variance**2, 0) / REPEATS) + 25 * exact / REPEATS + 1e-9
    assert np.all(np.abs(variance - exact) <= room), (variance, exact)


@CASES
@METHODS
def test_counts_have_the_exact_means_and_variances(identifier: str, method: str) -> None:
    expected = reference.case(identifier)["expected"]
    counts = _counts(identifier, method)
    exact = reference.value(expected[method]["count_variance"])
    wanted = reference.value(expected["expected_counts"])
    error = 5 * np.sqrt(np.maximum(exact, 0) / REPEATS)
    assert np.all(np.abs(counts.mean(axis=0) - wanted) <= error + 1e-6)
    _hold_variance(counts, exact)


@CASES
@METHODS
def test_a_resampled_mean_has_the_exact_variance(identifier: str, method: str) -> None:
    case = reference.case(identifier)
    means = _counts(identifier, method) @ np.array(case["inputs"]["values"]) / case["inputs"]["n"]
    exact = reference.value(case["expected"][method]["variance_of_resampled_mean"])
    _hold_variance(means, exact)


@CASES
def test_counts_keep_their_bounds_in_every_repetition(identifier: str) -> None:
    wanted = reference.value(reference.case(identifier)["expected"]["expected_counts"])
    # 1e-9: rounding of cumulative sums.
    assert np.all(np.abs(_counts(identifier, "systematic") - wanted) < 1 + 1e-9)
    assert np.all(np.abs(_counts(identifier, "stratified") - wanted) < 2 + 1e-9)
    assert np.all(_counts(identifier, "residual") >= np.floor(wanted + 1e-9))


@CASES
def test_multinomial_counts_are_multinomial(identifier: str) -> None:
    # Pearson's chi-square of all repetitions together at a level of 1e-4, as the case advises.
    wanted = reference.value(reference.case(identifier)["expected"]["expected_counts"])
    total = _counts(identifier, "multinomial").sum(axis=0)
    chi = float(((total - REPEATS * wanted) ** 2 / (REPEATS * wanted)).sum())
    assert stats.chi2.sf(chi, len(wanted) - 1) > 1e-4


@CASES
def test_multinomial_resampling_leaves_the_exact_number_of_distinct_draws(identifier: str) -> None:
    expected = reference.case(identifier)["expected"]["expected_distinct_multinomial"]
    distinct = (_counts(identifier, "multinomial") > 0).sum(axis=1)
    error = distinct.std(ddof=1) / np.sqrt(REPEATS)
    assert abs(distinct.mean() - reference.value(expected)) <= 5 * error


def test_without_replacement_draws_are_included_with_the_exact_probabilities() -> None:
    expected = reference.value(reference.case("P6.4")["expected"]["inclusion"])
    counts = _counts("P6.4", "without_replacement")
    assert np.all(counts <= 1)
    error = np.sqrt(expected * (1 - expected) / REPEATS)
    assert np.all(np.abs(counts.mean(axis=0) - expected) <= 5 * error)
