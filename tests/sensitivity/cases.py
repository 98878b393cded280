"""Reference cases of families 3 and 7, and fits whose posterior is known."""

from __future__ import annotations

import functools
import json
from pathlib import Path
from typing import Any

import numpy as np
from numpy.typing import NDArray

import steelyard as sy

Array = NDArray[np.float64]

_FOLDER = Path(__file__).resolve().parent.parent / "reference"
_FILES = {3: "prior_changes_family_03.json", 7: "family_07_sensitivity.json"}
# Cushny & Peebles (1905): differences of hours of sleep.
SLEEP = np.array([1.2, 2.4, 1.3, 1.3, 0.0, 1.0, 1.8, 0.8, 4.6, 1.4])
SIGMA = 1.23


@functools.cache
def _cases(family: int) -> dict[str, dict[str, Any]]:
    content = json.loads((_FOLDER / _FILES[family]).read_text(encoding="utf-8"))
    return {case["id"]: case for case in content["cases"]}


def case(identifier: str) -> dict[str, Any]:
    """The reference case with this identifier."""
    return _cases(int(identifier[1:].split(".")[0]))[identifier]


def value(entry: dict[str, Any]) -> Any:
    """The expected value of an entry."""
    stored = entry["value"]
    return np.asarray(stored, dtype=float) if isinstance(stored, list) else float(stored)


def normal_posterior(prior: tuple[float, float]) -> tuple[float, float]:
    """Mean and sd of the posterior of a normal mean, ten differences, sd known."""
    precision = 1 / prior[1] ** 2 + len(SLEEP) / SIGMA**2
    mean = (prior[0] / prior[1] ** 2 + SLEEP.sum() / SIGMA**2) / precision
    return mean, precision**-0.5


def sleep_fit(prior: tuple[float, float], chains: int, draws: int, seed: int) -> Any:
    """Independent draws of that posterior, with its prior and the likelihood of each difference."""
    mean, sd = normal_posterior(prior)
    theta = np.random.default_rng(seed).normal(mean, sd, size=(chains, draws))
    error = (SLEEP - theta[..., None]) / SIGMA
    loglik = -0.5 * error**2 - np.log(SIGMA) - 0.5 * np.log(2 * np.pi)
    return sy.Fit({"theta": theta}, {"theta": sy.Normal(*prior)}, {"sleep": loglik})


# Two-sided probability of four normal errors is 6.3e-5.
FOUR_ERRORS = 1 - 6.334e-5


def within(estimate: Any, expected: Any, slack: float = 0.0) -> None:
    """Hold an Estimate to its own error interval at the level of four errors."""
    error = np.asarray(estimate.error)
    assert np.all(np.isfinite(error))
    assert np.all(error > 0)
    low, high = estimate.error_interval(FOUR_ERRORS)
    assert np.all(low - slack <= np.asarray(expected)), f"{estimate} is above {expected}"
    assert np.all(np.asarray(expected) <= high + slack), f"{estimate} is below {expected}"


@functools.cache
def quays() -> Any:
    """A small hierarchical fit of invented corrosion rates at four quays, mm a year."""
    rng = np.random.default_rng(20_261_201)
    mu = rng.normal(0.10, 0.01, size=(4, 250))
    tau = np.abs(rng.normal(0.02, 0.006, size=(4, 250))) + 0.002
    rate = mu[..., None] + tau[..., None] * rng.normal(size=(4, 250, 4))
    readings = np.array([0.08, 0.13, 0.10, 0.12])
    gauge_a = -0.5 * ((readings - rate) / 0.03) ** 2
    gauge_b = -0.5 * ((readings[:3] + 0.01 - rate[..., :3]) / 0.04) ** 2
    prior = {"rate": sy.Normal("mu", "tau"), "mu": sy.Normal(0.1, 0.1), "tau": sy.HalfNormal(0.05)}
    return sy.Fit({"rate": rate, "mu": mu, "tau": tau}, prior, {"A": gauge_a, "B": gauge_b})
