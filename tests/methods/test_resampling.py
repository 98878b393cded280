"""Resampling: counts, frequencies and inclusion probabilities of the five methods."""

from __future__ import annotations

import numpy as np
import pytest
from scipy import stats

from steelyard import weights

SEED = 20_261_213
METHODS = ("systematic", "stratified", "residual", "multinomial", "without_replacement")
REPLACING = METHODS[:-1]
SHARES = np.array([0.02, 0.30, 0.08, 0.25, 0.0, 0.05, 0.20, 0.10])


def _log(shares: np.ndarray) -> np.ndarray:
    with np.errstate(divide="ignore"):
        return np.log(shares)


def _counts(method: str, size: int, repeats: int, seed: int) -> np.ndarray:
    rng = np.random.default_rng(seed)
    rows = [weights.resample(_log(SHARES), size, method, rng=rng) for _ in range(repeats)]
    return np.array([np.bincount(r, minlength=len(SHARES)) for r in rows])


def test_systematic_counts_differ_from_their_expectation_by_less_than_one() -> None:
    rng = np.random.default_rng(SEED)
    for _ in range(300):
        log_weights = rng.normal(size=50) * rng.uniform(0, 4)
        size = int(rng.integers(1, 400))
        w = np.exp(log_weights) / np.exp(log_weights).sum()
        counts = np.bincount(weights.resample(log_weights, size, rng=rng), minlength=50)
        # 1e-9: rounding of the cumulative sum.
        assert np.all(np.abs(counts - size * w) < 1 + 1e-9)


def test_residual_counts_are_never_below_the_whole_part_of_their_expectation() -> None:
    counts = _counts("residual", 37, 500, SEED + 1)
    assert np.all(counts >= np.floor(37 * SHARES + 1e-9))


def test_stratified_counts_differ_from_their_expectation_by_less_than_two() -> None:
    counts = _counts("stratified", 37, 500, SEED + 2)
    assert np.all(np.abs(counts - 37 * SHARES) < 2)


def test_multinomial_counts_are_multinomial() -> None:
    # Pearson's chi-square of one sample of 100,000 with 6 degrees of freedom, and the sum of
    # those of 400 samples of 200; both at a false-alarm rate of 1e-5.
    positive = SHARES > 0
    size, many = 100_000, _counts("multinomial", 200, 400, SEED + 3)[:, positive]
    one = _counts("multinomial", size, 1, SEED + 4)[0]
    expected = size * SHARES[positive]
    chi = float(np.sum((one[positive] - expected) ** 2 / expected))
    assert stats.chi2.sf(chi, 6) > 1e-5
    expected = 200 * SHARES[positive]
    total = float(np.sum((many - expected) ** 2 / expected))
    assert 1e-5 / 2 < stats.chi2.sf(total, 6 * 400) < 1 - 1e-5 / 2


@pytest.mark.parametrize("method", ["systematic", "stratified", "residual"])
def test_expected_counts_of_the_low_noise_methods_are_in_proportion_to_the_weights(
    method: str,
) -> None:
    # Chi-square of the mean counts of 4,000 resamples of 13, with the covariance of the counts
    # over the repeats in place of the multinomial one; false alarm 1e-5 a method.
    counts = _counts(method, 13, 4000, SEED + 5)
    deviation = counts.mean(axis=0) - 13 * SHARES
    covariance = np.cov(counts, rowvar=False) / len(counts)
    rank = int(np.linalg.matrix_rank(covariance, tol=1e-9))
    chi = float(deviation @ np.linalg.pinv(covariance, rcond=1e-6) @ deviation)
    assert rank >= 4
    assert stats.chi2.sf(chi, rank) > 1e-5


@pytest.mark.parametrize("method", ["systematic", "stratified", "residual"])
def test_the_low_noise_methods_vary_less_than_multinomial_counts(method: str) -> None:
    counts = _counts(method, 13, 1000, SEED + 6)
    multinomial = 13 * SHARES * (1 - SHARES)
    # The largest of the three totals is about two thirds of the multinomial one, known to 5 %.
    assert counts.var(axis=0).sum() < 0.9 * multinomial.sum()


def test_without_replacement_includes_draws_with_the_probabilities_of_successive_drawing() -> None:
    # Weights 1/2, 3/10, 1/5, two drawn: P(i) = w_i + Σ_j w_j w_i/(1 − w_j).
    exact = np.array([0.8392857143, 0.675, 0.4857142857])
    rng = np.random.default_rng(SEED + 7)
    repeats = 40_000
    logs = np.log([0.5, 0.3, 0.2])
    left_out = np.zeros(3)
    for _ in range(repeats):
        chosen = weights.resample(logs, 2, "without_replacement", rng=rng)
        left_out[3 - int(chosen.sum())] += 1
    # Pearson's chi-square of who was left out, 2 degrees of freedom; false alarm 1e-5.
    expected = repeats * (1 - exact)
    assert stats.chi2.sf(float(np.sum((left_out - expected) ** 2 / expected)), 2) > 1e-5


def test_without_replacement_no_draw_comes_twice() -> None:
    rng = np.random.default_rng(SEED + 8)
    for size in (1, 3, 7):
        rows = weights.resample(_log(SHARES), size, "without_replacement", rng=rng)
        assert len(np.unique(rows)) == size


@pytest.mark.parametrize("method", METHODS)
def test_a_draw_of_no_weight_is_never_chosen(method: str) -> None:
    rng = np.random.default_rng(SEED + 9)
    for _ in range(200):
        rows = weights.resample(_log(SHARES), 7, method, rng=rng)
        assert 4 not in rows


@pytest.mark.parametrize("method", METHODS)
def test_positions_are_ascending_and_as_many_as_asked(method: str) -> None:
    logs = np.random.default_rng(SEED + 10).normal(size=1000)
    for size in (1, 2, 999):
        rows = weights.resample(logs, size, method, rng=3)
        assert rows.dtype == np.int64
        assert rows.shape == (size,)
        assert np.all(np.diff(rows) >= 0)
        assert rows[0] >= 0
        assert rows[-1] < 1000


@pytest.mark.parametrize("method", REPLACING)
def test_one_draw_of_all_weight_is_chosen_every_time(method: str) -> None:
    logs = np.array([-np.inf, -900.0, -np.inf])
    assert weights.resample(logs, 5, method, rng=1).tolist() == [1] * 5


def test_first_draws_of_a_method_follow_the_weights_also_for_a_size_of_one() -> None:
    # Chi-square of 5,000 single draws of each replacing method, 6 degrees of freedom; false
    # alarm 1e-5 each.
    positive = SHARES > 0
    for number, method in enumerate(REPLACING):
        counts = _counts(method, 1, 5_000, SEED + 11 + number).sum(axis=0)[positive]
        expected = 5_000 * SHARES[positive]
        assert stats.chi2.sf(float(np.sum((counts - expected) ** 2 / expected)), 6) > 1e-5
