"""Covariances, distances and the divergence of target from base, against numpy and scipy."""

from __future__ import annotations

import numpy as np
import pytest
from scipy import integrate, stats

import steelyard as sy

SEED = 20_261_217


def _case(seed: int, n: int = 400) -> tuple[np.ndarray, np.ndarray, sy.Answer]:
    rng = np.random.default_rng(SEED + seed)
    x = rng.gamma(3, size=n)
    log_ratio = -0.3 * x + 0.2 * rng.normal(size=n)
    w = np.exp(log_ratio) / np.exp(log_ratio).sum()
    return x, w, sy.weigh(log_ratio, {"x": x}, smooth=False)


def test_covariances_equal_numpy_with_weights() -> None:
    rng = np.random.default_rng(SEED)
    log_ratio, x = 0.5 * rng.normal(size=300), rng.normal(size=(300, 3))
    got = sy.weigh(log_ratio, smooth=False).covariance(x)
    want = np.cov(x, rowvar=False, aweights=np.exp(log_ratio), ddof=0)
    # 1e-12: sums of 300 products.
    np.testing.assert_allclose(got.value, want, atol=1e-12)
    assert np.array_equal(got.value, got.value.T)
    assert np.array_equal(got.error, got.error.T)


def test_errors_of_unordered_covariances_equal_the_delta_method() -> None:
    rng = np.random.default_rng(SEED + 1)
    x = rng.normal(size=(500, 2))
    fit = sy.Fit(x, names=["a", "b"], ordered=False)
    centred = x - x.mean(axis=0)
    product = centred[:, 0] * centred[:, 1]
    want = product.std() / np.sqrt(500)
    # 1e-10 relative: mean squares of 500 terms.
    assert fit.base.covariance().error[0, 1] == pytest.approx(want, rel=1e-10)


def test_the_wasserstein_distance_equals_scipy_in_units_of_the_base_sd() -> None:
    x, w, answer = _case(2)
    want = stats.wasserstein_distance(x, x, w, np.full(len(x), 1 / len(x))) / x.std()
    # 1e-11 relative: a sum of 400 gaps.
    assert answer.distance("x").wasserstein.value == pytest.approx(want, rel=1e-11)


def test_the_largest_gap_is_the_one_found_by_looking_at_every_draw() -> None:
    x, w, answer = _case(3)
    gaps = [abs(w[x <= at].sum() - np.mean(x <= at)) for at in x]
    # 1e-12: partial sums of 400 weights.
    assert answer.distance("x").largest_gap.value == pytest.approx(max(gaps), abs=1e-12)


def test_the_cumulative_jensen_shannon_distance_equals_its_definition() -> None:
    # Nguyen & Vreeken (2015): √((C(P‖Q) + C(Q‖P))/∫(P + Q)), C(P‖Q) = ∫ P log₂(2P/(P + Q)) dx +
    # ∫ (Q − P) dx/(2 ln 2), over the range of the draws; the larger of x and −x.
    x, w, answer = _case(4)

    def one_side(values: np.ndarray) -> float:
        order = np.argsort(values)
        steps = np.diff(values[order])
        p, q = np.cumsum(w[order])[:-1], np.arange(1, len(values)) / len(values)

        def part(p: np.ndarray, q: np.ndarray) -> float:
            return float(
                np.sum(p * np.log2(2 * p / (p + q)) * steps)
                + np.sum((q - p) * steps) / (2 * np.log(2))
            )

        return float(np.sqrt((part(p, q) + part(q, p)) / np.sum((p + q) * steps)))

    want = max(one_side(x), one_side(-x))
    # 1e-9 relative: differences of distribution functions near one in the mirrored half.
    assert answer.distance("x").jensen_shannon.value == pytest.approx(want, rel=1e-9)


def test_distances_from_a_base_that_is_the_target_are_zero() -> None:
    x, _, _ = _case(5)
    distance = sy.weigh(np.zeros(400), {"x": x}).distance("x")
    for one in (distance.wasserstein, distance.largest_gap, distance.jensen_shannon):
        # 1e-7 and not less: the square root of a rounding of 1e-16.
        assert one.value == pytest.approx(0, abs=1e-7)


def test_the_divergence_is_the_mean_log_weight_ratio() -> None:
    _, w, answer = _case(6)
    # 1e-12: a sum of 400 terms.
    assert answer.divergence.value == pytest.approx(np.sum(w * np.log(400 * w)), abs=1e-12)


def test_a_divergence_beyond_the_log_of_the_number_of_draws_is_not_measured() -> None:
    # Weighted draws, back to equal weights: half of them counted for nothing in the base.
    x = np.random.default_rng(SEED).normal(size=(4, 50))
    logs = np.where(x > 0, 1000.0, 0.0)
    fit = sy.Fit({"mu": x}, log_weights=logs)
    divergence = fit.reweigh(sy.log_ratio(-logs)).divergence
    assert divergence.value > np.log(200)
    assert divergence.verdict.level == "refit"
    assert divergence.verdict.reasons[0].code == "saturated_divergence"
    assert fit.reweigh(sy.log_ratio(0.1 * x)).divergence.verdict.level != "refit"


def test_the_divergence_of_a_shifted_normal_is_half_its_squared_shift() -> None:
    # N(0.6, 1) from N(0, 1): 0.18. Held to five errors of 40,000 draws (false alarm 6e-7) and
    # 0.002 of bias of order 1/S.
    x = np.random.default_rng(SEED + 7).normal(size=40_000)
    divergence = sy.weigh(0.6 * x).divergence
    assert abs(divergence.value - 0.18) <= 5 * divergence.error + 0.002
    # The exact error: S·Var = Var_p(w (ℓ − KL − 1)), ℓ = 0.6 x − 0.18.
    variance, _ = integrate.quad(
        lambda t: (np.exp(0.6 * t - 0.18) * (0.6 * t - 0.36 - 1) + 1) ** 2 * stats.norm.pdf(t),
        -12,
        12,
    )
    # 5 %: a mean square of 40,000 terms with a moderate tail.
    assert divergence.error == pytest.approx(np.sqrt(variance / 40_000), rel=0.05)


def test_distances_of_a_shifted_normal_are_their_closed_forms() -> None:
    # A shift by 0.5: Wasserstein-1 in sds 0.5, Kolmogorov 2 Φ(0.25) − 1. Five errors each; false
    # alarm 6e-7; the gap is a maximum and so biased upwards by at most about one error.
    x = np.random.default_rng(SEED + 8).normal(size=(4, 10_000))
    distance = sy.weigh(0.5 * x, {"x": x}).distance("x")
    for estimate, want in (
        (distance.wasserstein, 0.5),
        (distance.largest_gap, 2 * stats.norm.cdf(0.25) - 1),
    ):
        assert abs(estimate.value - want) <= 6 * estimate.error
        assert estimate.error < 0.03
