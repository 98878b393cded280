"""Weighted means, sds, quantiles and intervals against numpy and brute force."""

from __future__ import annotations

import numpy as np
import pytest

import steelyard as sy

from . import twins

SEED = 20_261_212
PROBS = np.array([0.0, 0.01, 0.05, 0.25, 0.5, 0.731, 0.95, 1.0])


def _weighted(seed: int, n: int = 500) -> tuple[np.ndarray, np.ndarray, np.ndarray, sy.Answer]:
    rng = np.random.default_rng(seed)
    x, log_ratio = rng.normal(size=n), 0.5 * rng.normal(size=n)
    w = np.exp(log_ratio)
    return x, log_ratio, w / w.sum(), sy.weigh(log_ratio, smooth=False)


def test_raw_weights_are_the_normalised_exponentials() -> None:
    _, _, w, answer = _weighted(SEED)
    # 1e-13 relative: an exponential and a sum.
    np.testing.assert_allclose(answer.weights, w, rtol=1e-13)
    np.testing.assert_allclose(answer.log_weights, np.log(w), rtol=1e-13)


def test_weighted_mean_and_sd_equal_numpy_average() -> None:
    x, _, w, answer = _weighted(SEED + 1)
    mean = np.average(x, weights=w)
    sd = np.sqrt(np.average((x - mean) ** 2, weights=w))
    # 1e-12 relative: sums of 500 terms in another order.
    assert answer.mean(x).value == pytest.approx(mean, rel=1e-12)
    assert answer.sd(x).value == pytest.approx(sd, rel=1e-12)


def test_delta_method_errors_of_unordered_draws_equal_their_formulas() -> None:
    rng = np.random.default_rng(SEED + 2)
    x, log_ratio = rng.normal(size=800), 0.4 * rng.normal(size=800)
    fit = sy.Fit({"x": x}, ordered=False)
    answer = fit.reweigh(sy.log_ratio(log_ratio), smooth=False)
    w = np.exp(log_ratio) / np.exp(log_ratio).sum()
    mean = np.average(x, weights=w)
    sd = np.sqrt(np.average((x - mean) ** 2, weights=w))
    z_mean = 800 * w * (x - mean)
    z_sd = 800 * w * ((x - mean) ** 2 - sd**2) / (2 * sd)
    z_shift = z_mean - (x - x.mean())
    z_evidence = 800 * w - 1
    # 1e-10 relative: mean squares of 800 terms.
    for estimate, z in (
        (answer.mean("x"), z_mean),
        (answer.sd("x"), z_sd),
        (answer.shift("x"), z_shift),
        (answer.log_evidence_ratio, z_evidence),
    ):
        assert estimate.error == pytest.approx(np.sqrt(np.mean(z**2) / 800), rel=1e-10)


def test_equal_weights_give_hazen_quantiles() -> None:
    x = np.random.default_rng(SEED + 3).normal(size=(333, 3))
    got = sy.weigh(np.zeros(333)).quantile(x, PROBS).value
    # 1e-12: an interpolation between two draws of size 1.
    np.testing.assert_allclose(got, np.quantile(x, PROBS, axis=0, method="hazen"), atol=1e-12)


def test_weighted_quantiles_equal_the_plain_twin() -> None:
    x, log_ratio, w, answer = _weighted(SEED + 4)
    want = twins.weighted_quantile(x, w, PROBS)
    # 1e-11: an interpolation whose step is divided by a weight of 1e-4.
    np.testing.assert_allclose(answer.quantile(x, PROBS).value, want, atol=1e-11)
    np.testing.assert_allclose(sy.weights.quantile(x, log_ratio, PROBS), want, atol=1e-11)


def test_equal_values_share_one_step_of_the_distribution() -> None:
    rng = np.random.default_rng(SEED + 5)
    x = rng.integers(0, 6, size=400).astype(np.float64)
    log_weights = rng.normal(size=400)
    want = twins.weighted_quantile(x, np.exp(log_weights), PROBS)
    # 1e-11: as above.
    np.testing.assert_allclose(sy.weights.quantile(x, log_weights, PROBS), want, atol=1e-11)


def test_draws_of_no_weight_do_not_enter_quantiles() -> None:
    log_weights = np.array([-np.inf, 0.0, 0.0, 0.0, -np.inf])
    x = np.array([-100.0, 1.0, 2.0, 3.0, 100.0])
    assert sy.weights.quantile(x, log_weights, [0.0, 0.5, 1.0]).tolist() == [1.0, 2.0, 3.0]


def test_a_central_interval_is_a_pair_of_quantiles() -> None:
    x, _, _, answer = _weighted(SEED + 6)
    interval = answer.interval(x, 0.9)
    # 1e-12: the two probabilities are formed by other operations.
    np.testing.assert_allclose(interval.value, answer.quantile(x, (0.05, 0.95)).value, atol=1e-12)
    np.testing.assert_allclose(interval.error, answer.quantile(x, (0.05, 0.95)).error, rtol=1e-9)


@pytest.mark.parametrize("mass", [0.2, 0.5, 0.8, 0.95])
@pytest.mark.parametrize("seed", range(4))
def test_a_shortest_interval_is_the_one_that_trying_all_pairs_finds(mass: float, seed: int) -> None:
    rng = np.random.default_rng(SEED + 10 + seed)
    x, log_ratio = rng.gamma(2, size=60), rng.normal(size=60)
    got = sy.weigh(log_ratio, smooth=False).interval(x, mass, "shortest").value
    # 1e-12: ends are draws themselves.
    np.testing.assert_allclose(got, twins.shortest_interval(x, np.exp(log_ratio), mass), rtol=1e-12)


def test_a_shortest_interval_of_tied_draws_holds_its_mass() -> None:
    x = np.repeat([0.0, 1.0, 2.0, 3.0], [10, 40, 40, 10])
    got = sy.weigh(np.zeros(100)).interval(x, 0.8, "shortest").value
    assert got.tolist() == [1.0, 2.0]


def test_the_probability_of_an_event_is_the_weight_of_its_draws() -> None:
    x, _, w, answer = _weighted(SEED + 7)
    # 1e-12 relative: a sum of 500 weights.
    assert answer.prob(x > 0.7).value == pytest.approx(w[x > 0.7].sum(), rel=1e-12)


def test_the_log_evidence_ratio_is_the_log_mean_of_the_ratios() -> None:
    _, log_ratio, _, answer = _weighted(SEED + 8)
    # 1e-12: a logarithm of a mean.
    assert answer.log_evidence_ratio.value == pytest.approx(
        np.log(np.mean(np.exp(log_ratio))), abs=1e-12
    )


def test_base_weights_enter_mean_shift_and_log_evidence_ratio() -> None:
    rng = np.random.default_rng(SEED + 9)
    x, own, log_ratio = rng.normal(size=400), rng.normal(size=400), 0.5 * rng.normal(size=400)
    fit = sy.Fit({"x": x}, log_weights=own)
    answer = fit.reweigh(sy.log_ratio(log_ratio), smooth=False)
    v, w = np.exp(own), np.exp(own + log_ratio)
    target, base = np.average(x, weights=w), np.average(x, weights=v)
    # 1e-12: sums of 400 terms.
    assert fit.base.mean("x").value == pytest.approx(base, abs=1e-12)
    assert answer.mean("x").value == pytest.approx(target, abs=1e-12)
    assert answer.shift("x").value == pytest.approx(target - base, abs=1e-12)
    assert answer.log_evidence_ratio.value == pytest.approx(np.log(w.sum() / v.sum()), abs=1e-12)


@pytest.mark.parametrize("of", ["mean", "sd", ("quantile", 0.3)])
def test_a_shift_is_the_estimate_minus_that_of_the_base(of: object) -> None:
    rng = np.random.default_rng(SEED + 20)
    x = rng.normal(size=(4, 200))
    fit = sy.Fit({"x": x})
    answer = fit.reweigh(sy.log_ratio(0.3 * x))

    def value(one: sy.Answer) -> float:
        if isinstance(of, tuple):
            return float(one.quantile("x", of[1]).value)
        return float(getattr(one, str(of))("x").value)

    # 1e-12: the same two numbers subtracted.
    assert answer.shift("x", of).value == pytest.approx(value(answer) - value(fit.base), abs=1e-12)


def test_effective_sizes_and_largest_share_equal_their_definitions() -> None:
    _, log_ratio, w, answer = _weighted(SEED + 21)
    # 1e-12 relative: sums of 500 terms.
    assert answer.effective_size == pytest.approx(1 / np.sum(w**2), rel=1e-12)
    assert answer.entropy_size == pytest.approx(np.exp(-np.sum(w * np.log(w))), rel=1e-12)
    assert answer.largest_share == pytest.approx(w.max(), rel=1e-12)
    assert sy.weights.effective_size(log_ratio) == pytest.approx(1 / np.sum(w**2), rel=1e-12)
    assert sy.weights.largest_share(log_ratio) == pytest.approx(w.max(), rel=1e-12)


def test_deletion_influence_equals_reweighing_one_observation_at_a_time() -> None:
    rng = np.random.default_rng(SEED + 22)
    loglik, f = 0.2 * rng.normal(size=(300, 7)), rng.normal(size=(300, 3))
    want = np.empty((7, 3))
    for i in range(7):
        w = np.exp(-loglik[:, i])
        want[i] = np.average(f, axis=0, weights=w) - f.mean(axis=0)
    # 1e-12: means of 300 terms.
    np.testing.assert_allclose(sy.weights.influence(loglik, f), want / f.std(axis=0), atol=1e-12)
