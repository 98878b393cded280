"""Reported Monte Carlo errors against exact ones, and the coverage of the intervals they make.

N(0, 1) draws reweighted to N(1/2, 1): independent draws (4,000) and AR(1) chains with ρ = 0.6
(4 chains of 1,000). Exact asymptotic errors are in `hermite`; for the mean and independent draws
``S·Var = (1 + m²) exp(m²)``. 200 data sets each.

- The mean of 200 reported squared errors is held to 10 % of the exact one. Its own noise is
  about 1.5 % (AR: 2 %), the smoothing of weights and the truncated sequence may bias it by a few
  per cent; 10 % is what the project promises on an easy problem.
- Coverage of 95 % intervals: at least as many of 200 as a binomial with p = 0.95 exceeds all but
  1e-6 of the time, less one point for the 10 %; false alarm 1e-6 for each of 18 comparisons.
"""

from __future__ import annotations

import math
from functools import cache

import numpy as np
import pytest
from scipy import stats

import steelyard as sy

from . import hermite, twins

SEED = 20_261_214
SHIFT = 0.5
REPEATS = 200
LIMIT = 1.0
RHO = {"independent": 0.0, "autocorrelated": 0.6}
SERIES = {
    "mean": hermite.mean_series(SHIFT),
    "sd": hermite.sd_series(SHIFT),
    "median": hermite.quantile_series(SHIFT, 0.5),
    "upper quantile": hermite.quantile_series(SHIFT, 0.9),
    "probability": hermite.event_series(SHIFT, LIMIT),
    "shift": hermite.shift_series(SHIFT),
    "shift of the sd": hermite.sd_shift_series(SHIFT),
    "shift of the median": hermite.median_shift_series(SHIFT),
    "log evidence ratio": hermite.evidence_series(SHIFT),
}
TRUTH = {
    "mean": SHIFT,
    "sd": 1.0,
    "median": SHIFT,
    "upper quantile": SHIFT + float(stats.norm.ppf(0.9)),
    "probability": float(stats.norm.sf(LIMIT - SHIFT)),
    "shift": SHIFT,
    "shift of the sd": 0.0,
    "shift of the median": SHIFT,
    "log evidence ratio": 0.0,
}
CASES = pytest.mark.parametrize("kind", RHO)
QUANTITIES = pytest.mark.parametrize("quantity", SERIES)


@cache
def _estimates(kind: str) -> dict[str, np.ndarray]:
    """Values and errors of each quantity over the data sets, shape ``(REPEATS, 2)``."""
    rng = np.random.default_rng(SEED)
    found: dict[str, list[tuple[float, float]]] = {name: [] for name in SERIES}
    change = sy.log_ratio(lambda draws: SHIFT * draws["x"] - SHIFT**2 / 2)
    for _ in range(REPEATS):
        x = twins.autoregression(rng, RHO[kind], 4, 1000)
        answer = sy.Fit({"x": x}, ordered=kind != "independent").reweigh(change)
        for name, estimate in {
            "mean": answer.mean("x"),
            "sd": answer.sd("x"),
            "median": answer.quantile("x", 0.5),
            "upper quantile": answer.quantile("x", 0.9),
            "probability": answer.prob("x > 1"),
            "shift": answer.shift("x"),
            "shift of the sd": answer.shift("x", "sd"),
            "shift of the median": answer.shift("x", ("quantile", 0.5)),
            "log evidence ratio": answer.log_evidence_ratio,
        }.items():
            found[name].append((float(estimate.value), float(estimate.error)))
    return {name: np.array(pairs) for name, pairs in found.items()}


def _exact_error(kind: str, quantity: str) -> float:
    return math.sqrt(SERIES[quantity].long_run_variance(RHO[kind]) / 4000)


@pytest.mark.parametrize(
    "quantity", ["mean", "sd", "shift", "shift of the sd", "log evidence ratio"]
)
def test_the_exact_variances_agree_with_their_hermite_series(quantity: str) -> None:
    # 1e-12 relative: 24 terms of an exponential series at m = 1/2. (Those of events converge
    # slowly and are not needed: there the variance is integrated.)
    series = SERIES[quantity]
    k = np.arange(1, len(series.coefficients))
    factorial = np.array([math.factorial(int(i)) for i in k], dtype=float)
    total = float(np.sum(factorial * series.coefficients[1:] ** 2))
    assert total == pytest.approx(series.variance, rel=1e-12)


@QUANTITIES
def test_the_exact_long_run_variance_is_that_of_one_long_simulated_chain(quantity: str) -> None:
    # Batch means of the exact influence values over 400 chains of 2,000: the variance of 400
    # means has a relative error of 7 %; five of those. False alarm 6e-7 each.
    rng = np.random.default_rng(SEED + 1)
    x = twins.autoregression(rng, 0.6, 400, 2000)
    w = np.exp(SHIFT * x - SHIFT**2 / 2)
    limit, density = TRUTH["upper quantile"], float(stats.norm.pdf(stats.norm.ppf(0.9)))
    z = {
        "mean": w * (x - SHIFT),
        "sd": w * ((x - SHIFT) ** 2 - 1) / 2,
        "median": w * ((x > SHIFT) - 0.5) / float(stats.norm.pdf(0)),
        "upper quantile": w * ((x > limit) - 0.1) / density,
        "probability": w * ((x > LIMIT) - TRUTH["probability"]),
        "shift": w * (x - SHIFT) - x,
        "shift of the sd": w * ((x - SHIFT) ** 2 - 1) / 2 - (x**2 - 1) / 2,
        "shift of the median": (w * ((x > SHIFT) - 0.5) - ((x > 0) - 0.5)) * math.sqrt(2 * math.pi),
        "log evidence ratio": w - 1,
    }[quantity]
    simulated = 2000 * z.mean(axis=1).var(ddof=1)
    assert simulated == pytest.approx(SERIES[quantity].long_run_variance(0.6), rel=0.35)


@CASES
@QUANTITIES
def test_the_average_squared_error_is_the_exact_one(kind: str, quantity: str) -> None:
    reported = np.mean(_estimates(kind)[quantity][:, 1] ** 2)
    assert reported == pytest.approx(_exact_error(kind, quantity) ** 2, rel=0.10)


@CASES
@QUANTITIES
def test_ninety_five_per_cent_intervals_cover(kind: str, quantity: str) -> None:
    value, error = _estimates(kind)[quantity].T
    covered = np.abs(value - TRUTH[quantity]) <= stats.norm.ppf(0.975) * error
    assert covered.sum() >= stats.binom.ppf(1e-6, REPEATS, 0.94)


@CASES
@QUANTITIES
def test_values_scatter_as_the_exact_error_says(kind: str, quantity: str) -> None:
    # The variance of 200 values over the exact one times 199 is chi-square with 199 degrees of
    # freedom; both tails at 1e-6, widened by 5 % for terms of second order in 1/S.
    value = _estimates(kind)[quantity][:, 0]
    ratio = value.var(ddof=1) / _exact_error(kind, quantity) ** 2
    low, high = stats.chi2.ppf([1e-6, 1 - 1e-6], REPEATS - 1) / (REPEATS - 1)
    assert 0.95 * low < ratio < 1.05 * high


@CASES
@QUANTITIES
def test_values_are_centred_on_the_truth(kind: str, quantity: str) -> None:
    # The mean of 200 values to five of its own exact errors (false alarm 6e-7) and a bias of
    # order 1/S: a tenth of one error.
    value = _estimates(kind)[quantity][:, 0]
    exact = _exact_error(kind, quantity)
    assert abs(value.mean() - TRUTH[quantity]) <= 5 * exact / math.sqrt(REPEATS) + 0.1 * exact
