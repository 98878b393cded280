"""Family 10: reported Monte Carlo errors against closed forms, and their coverage.

AR(1) draws with N(0, 1) margin, reweighted to N(m, 1). 150 data sets of 4,000 draws: the average
reported error is held to 10 % of the closed form, as the case advises; its own noise is about 1 %
for means and about 2 % for quantiles. Seeds below.
"""

from __future__ import annotations

import functools
import math
from collections.abc import Callable
from typing import Any

import numpy as np
import pytest
from numpy.typing import NDArray
from scipy import signal

import steelyard as sy

from . import reference

Array = NDArray[np.float64]
DRAWS = 4000
SETS = 150
COVERAGE_SETS = 1000
CASES = pytest.mark.parametrize("identifier", ["P10.1", "P10.2"])


@functools.cache
def _chains(rho: float, sets: int, seed: int) -> Array:
    """Stationary chains, one a row."""
    rng = np.random.default_rng(seed)
    start = rng.normal(size=(sets, 1))
    steps = math.sqrt(1 - rho**2) * rng.normal(size=(sets, DRAWS - 1))
    rest, _ = signal.lfilter([1.0], [1.0, -rho], steps, axis=1, zi=rho * start)
    return np.concatenate([start, rest], axis=1)


def _inputs(identifier: str) -> tuple[float, float, dict[str, Any]]:
    case = reference.case(identifier)
    return float(case["inputs"]["m"]), float(case["inputs"]["rho"]), case["expected"]


def _average_variance(
    chains: Array, m: float, ordered: bool, ask: Callable[[sy.Answer], sy.Estimate]
) -> float:
    """S times the square of the average reported error."""
    errors = [
        ask(sy.Fit({"x": x}, ordered=ordered).reweigh(sy.log_ratio(m * x - m**2 / 2))).error
        for x in chains
    ]
    return float(DRAWS * np.mean(errors) ** 2)


@CASES
def test_errors_of_independent_draws_are_the_closed_forms(identifier: str) -> None:
    m, _, expected = _inputs(identifier)
    chains = _chains(0.0, SETS, 1001)
    asked: dict[str, tuple[Any, Callable[[sy.Answer], sy.Estimate]]] = {
        "mean": (expected["S_times_variance_iid"], lambda a: a.mean("x")),
        "constant": (
            expected["S_times_variance_mean_weight_iid"],
            lambda a: a.log_evidence_ratio,
        ),
    }
    for p in (0.05, 0.5, 0.9):
        entry = expected[f"weighted_quantile_{p}_iid"]
        asked[f"quantile {p}"] = (entry["S_times_variance"], lambda a, p=p: a.quantile("x", p))
    for name, (entry, ask) in asked.items():
        found = _average_variance(chains, m, False, ask)
        assert abs(math.sqrt(found / reference.value(entry)) - 1) < 0.10, name


@CASES
def test_errors_of_autocorrelated_draws_are_the_closed_forms(identifier: str) -> None:
    m, rho, expected = _inputs(identifier)
    chains = _chains(rho, SETS, 1002)
    for entry, ask in (
        (expected["S_times_variance_ar1"], lambda a: a.mean("x")),
        (expected["S_times_variance_mean_weight_ar1"], lambda a: a.log_evidence_ratio),
    ):
        found = _average_variance(chains, m, True, ask)
        assert abs(math.sqrt(found / reference.value(entry)) - 1) < 0.10


@CASES
def test_errors_under_equal_weights_are_the_closed_forms(identifier: str) -> None:
    # Mean: (1 + ρ)/(1 − ρ) of Geyer and others; median: the arcsine law.
    _, rho, expected = _inputs(identifier)
    chains = _chains(rho, SETS, 1003)
    time = expected["equal_weight_mean"]["integrated_autocorrelation_time"]
    for entry, ask in (
        (time, lambda a: a.mean("x")),
        (expected["equal_weight_median"]["S_times_variance"], lambda a: a.quantile("x", 0.5)),
    ):
        found = _average_variance(chains, 0.0, True, ask)
        assert abs(math.sqrt(found / reference.value(entry)) - 1) < 0.10
    effective = [sy.Fit({"x": x}).base.mean("x").effective_draws for x in chains]
    limit = reference.value(expected["equal_weight_mean"]["limit_ess_over_S"])
    # 10 % of an error are 20 % of effective draws; the median is not pulled by single chains.
    assert abs(np.median(effective) / DRAWS / limit - 1) < 0.10


@CASES
def test_effective_sizes_approach_their_limit(identifier: str) -> None:
    m, _, expected = _inputs(identifier)
    limit = reference.value(expected["limit_ess_fraction"])
    sizes = [sy.weigh(m * x).effective_size / DRAWS for x in _chains(0.0, SETS, 1001)]
    # The mean of 150 is noisy to 0.3 %; its bias is of order exp(6 m²)/S at most, 1 % here.
    assert abs(np.mean(sizes) / limit - 1) < 0.015


@CASES
def test_ninety_per_cent_intervals_of_a_weighted_mean_cover_as_often_as_they_say(
    identifier: str,
) -> None:
    # 870 to 930 of 1,000 as the case advises: three binomial sds, false alarm 0.3 % a seed.
    m, rho, _ = _inputs(identifier)
    covered = 0
    for x in _chains(rho, COVERAGE_SETS, 1004):
        low, high = sy.Fit({"x": x}).reweigh(sy.log_ratio(m * x)).mean("x").error_interval(0.9)
        covered += bool(low <= m <= high)
    assert 870 <= covered <= 930, covered
