"""Family 3: the eight schools of Rubin (1981) under other priors on the spread between them.

40,000 exact draws of the base posterior (τ by inversion of its distribution function on a grid,
then μ and θ, all normal), seeds below; every estimate is held to four of its own errors, some 150
comparisons at 6.3e-5 each.
"""

from __future__ import annotations

import functools
import math
from typing import Any

import numpy as np
import pytest
from numpy.typing import NDArray

import steelyard as sy

from . import reference
from .comparing import assert_within_errors

Array = NDArray[np.float64]
DRAWS = 40_000
_PRIORS: dict[str, Any] = {
    "half_cauchy": sy.HalfCauchy,
    "half_normal": sy.HalfNormal,
    "exponential": sy.Exponential,
    "uniform": lambda _: sy.Flat(0, math.inf),
}
_CHANGES = [
    ("P3.1", "half_cauchy_25"),
    ("P3.1", "half_cauchy_5"),
    ("P3.1", "uniform"),
    ("P3.1", "half_normal_10"),
    ("P3.2", "half_normal_5"),
    ("P3.2", "half_cauchy_5"),
    ("P3.2", "exponential_02"),
]


def _prior(identifier: str, name: str) -> Any:
    family, number = reference.case(identifier)["inputs"]["priors"][name]
    return _PRIORS[family](number)


def _given(tau: Array, y: Array, s: Array, mu_prior: tuple[float, float]) -> tuple[Array, Array]:
    """Precision and mean of μ given τ; `mu_prior` is (mean, precision)."""
    variance = s**2 + tau[:, None] ** 2
    precision = (1 / variance).sum(axis=1) + mu_prior[1]
    return precision, ((y / variance).sum(axis=1) + mu_prior[0] * mu_prior[1]) / precision


@functools.cache
def _fit(identifier: str) -> sy.Fit:
    inputs = reference.case(identifier)["inputs"]
    y, s = np.array(inputs["y"]), np.array(inputs["s"])
    flat = inputs["mu_prior"] == "flat"
    mu_prior = (0.0, 0.0) if flat else (inputs["mu_prior"][0], inputs["mu_prior"][1] ** -2)
    base = _prior(identifier, inputs["base"])
    tau = np.exp(np.linspace(-16, 10, 60_001))
    precision, centre = _given(tau, y, s, mu_prior)
    variance = s**2 + tau[:, None] ** 2
    misfit = ((y - centre[:, None]) ** 2 / variance + np.log(variance)).sum(axis=1)
    misfit += mu_prior[1] * (centre - mu_prior[0]) ** 2 + np.log(precision)
    log = base.log_density(tau) + np.log(tau) - 0.5 * misfit
    mass = np.cumsum(np.exp(log - log.max()))
    rng = np.random.default_rng(301)
    drawn = np.interp(rng.uniform(size=DRAWS) * mass[-1], mass, tau)
    precision, centre = _given(drawn, y, s, mu_prior)
    mu = rng.normal(centre, precision**-0.5)
    own = 1 / s**2 + 1 / drawn[:, None] ** 2
    theta = rng.normal((y / s**2 + mu[:, None] / drawn[:, None] ** 2) / own, own**-0.5)
    prior = {
        "theta": sy.Normal("mu", "tau"),
        "mu": sy.Flat() if flat else sy.Normal(*inputs["mu_prior"]),
        "tau": base,
    }
    return sy.Fit({"mu": mu, "tau": drawn, "theta": theta}, prior, ordered=False)


def _hold(answer: sy.Answer, expected: dict[str, Any]) -> int:
    """Every quantity of the case; how many of them the answer calls sound."""
    quantiles = answer.quantile("tau", [0.05, 0.5, 0.95])
    asked = {
        "mu_mean": answer.mean("mu"),
        "mu_sd": answer.sd("mu"),
        "tau_mean": answer.mean("tau"),
        "tau_sd": answer.sd("tau"),
        "prob_tau_gt_10": answer.prob("tau > 10"),
        "prob_mu_positive": answer.prob("mu > 0"),
        "theta_mean": answer.mean("theta"),
        "theta_sd": answer.sd("theta"),
    }
    sound = 0
    for name, estimate in asked.items():
        if name in expected and np.all(estimate.verdict.is_sound):
            assert_within_errors(estimate, reference.value(expected[name]))
            sound += 1
    wanted = [reference.value(expected[f"tau_q{p}"]) for p in ("0.05", "0.5", "0.95")]
    away = np.abs(quantiles.value - np.array(wanted)) <= 4 * quantiles.error
    assert np.all(away | ~quantiles.verdict.is_sound)
    return sound


@pytest.mark.parametrize(("identifier", "name"), _CHANGES)
def test_posteriors_under_another_prior_on_the_spread(identifier: str, name: str) -> None:
    expected = reference.case(identifier)["expected"]
    answer = _fit(identifier).reweigh(sy.swap_prior(tau=_prior(identifier, name)))
    # Toward a heavier tail than half-normal(5) the weights have tail index 1 in the limit: what
    # rests on that tail may be refused there, and is held to the truth only where it is not.
    assert _hold(answer, expected[name]) >= (8 if identifier == "P3.1" else 4)


@pytest.mark.parametrize(
    ("identifier", "name"), [pair for pair in _CHANGES if pair[1] not in ("half_cauchy_25",)]
)
def test_constants_and_effective_sizes_under_another_prior(identifier: str, name: str) -> None:
    case = reference.case(identifier)
    limits = case["expected"].get(f"from_{case['inputs']['base']}_to_{name}")
    if limits is None:
        assert name == case["inputs"]["base"]
        return
    answer = _fit(identifier).reweigh(sy.swap_prior(tau=_prior(identifier, name)))
    if "log_marginal_ratio" in limits:
        constant = answer.log_evidence_ratio
        assert_within_errors(constant, reference.value(limits["log_marginal_ratio"]))
    else:
        with pytest.raises(sy.errors.PriorError, match="arbitrary"):
            _ = answer.log_evidence_ratio
    # 5 %, as for the closed-form limits of family 5 at this number of draws.
    perplexity = reference.value(limits["limit_perplexity_fraction"])
    assert abs(answer.entropy_size / DRAWS / perplexity - 1) < 0.05
    if identifier == "P3.1":
        share = reference.value(limits["limit_ess_fraction"])
        assert abs(answer.effective_size / DRAWS / share - 1) < 0.05
    else:
        assert "finite" in limits["limit_ess_fraction"]["value"]


def test_the_published_table_of_school_a_is_met_within_its_own_simulation_error() -> None:
    # Gelman et al., Bayesian Data Analysis, table 5.3: 200 simulations, uniform prior on τ:
    # 2.5, 25, 50, 75 and 97.5 % are -2, 7, 10, 16, 31, rounded. A quantile of 200 draws has the
    # error sqrt(p(1 − p)/200)/density; normal density of sd 8 to 10 here, so 4 errors are 7.6, 4.0
    # and 3.5, and half a unit for rounding.
    answer = _fit("P3.1").reweigh(sy.swap_prior(tau=sy.Flat(0, math.inf)))
    found = answer.quantile("theta[0]", [0.025, 0.25, 0.5, 0.75, 0.975]).value
    assert np.all(np.abs(found - [-2, 7, 10, 16, 31]) <= [8.1, 4.5, 4.0, 4.5, 8.1])
