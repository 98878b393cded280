"""The one-parameter conjugate models of family 1: exact posterior draws, stated as fits."""

from __future__ import annotations

import functools
import json
from dataclasses import dataclass
from typing import Any

import numpy as np
from numpy.typing import NDArray
from scipy import stats

import steelyard as sy

from . import reference

Array = NDArray[np.float64]

SIZE = 100_000


@dataclass(frozen=True)
class Setting:
    """A fit of one parameter, the change of its prior, their plain twins, and the exact target."""

    name: str
    fit: Any
    change: Any
    values: Array
    log_ratio: Array
    target: Any
    expected: dict[str, Any]


@functools.cache
def setting(identifier: str) -> Setting:
    """The case as a user would state it; draws from the exact base posterior, one seed a case."""
    case = reference.case(identifier)
    make = {"P1.1": _sleep, "P1.2": _births, "P1.3": _deaths}[identifier[:4]]
    name, posterior, loglik, prior = make(case)
    seed = 1000 + 10 * int(identifier[3]) + "abc".index(identifier[4])
    values = posterior("base").rvs(size=SIZE, random_state=np.random.default_rng(seed))
    old, new = (case["inputs"][f"{which}_prior"] for which in ("base", "new"))
    return Setting(
        name,
        sy.Fit({name: values}, prior={name: prior(*old)}, loglik=loglik(values), ordered=False),
        sy.swap_prior({name: prior(*new)}),
        values,
        _log_density(prior, values, new) - _log_density(prior, values, old),
        posterior("new"),
        case["expected"],
    )


def _log_density(prior: Any, values: Array, arguments: list[float]) -> Array:
    """Log densities by scipy, so that Steelyard's own are not their own judge."""
    if prior is sy.Normal:
        return stats.norm.logpdf(values, *arguments)
    if prior is sy.Beta:
        return stats.beta.logpdf(values, *arguments)
    shape, rate = arguments
    return stats.gamma.logpdf(values, shape, scale=1 / rate)


def sleep_posterior(inputs: dict[str, Any], which: str) -> tuple[float, float]:
    """Mean and sd of the sleep difference under the ``"base"`` or the ``"new"`` prior."""
    prior_mean, prior_sd = inputs[f"{which}_prior"]
    data_precision = inputs["n"] / float(inputs["sigma"]) ** 2
    precision = prior_sd**-2 + data_precision
    mean = (prior_mean / prior_sd**2 + float(inputs["ybar"]) * data_precision) / precision
    return mean, precision**-0.5


def _sleep(case: dict[str, Any]) -> tuple[Any, ...]:
    inputs = case["inputs"]
    listed = case["data"]
    differences = np.array(json.loads(listed[listed.index("[") : listed.index("]") + 1]))
    sigma = float(inputs["sigma"])
    return (
        "difference",
        lambda which: stats.norm(*sleep_posterior(inputs, which)),
        lambda values: stats.norm.logpdf(differences, values[:, None], sigma),
        sy.Normal,
    )


def _births(case: dict[str, Any]) -> tuple[Any, ...]:
    inputs = case["inputs"]
    girls, births = inputs["y"], inputs["n"]

    def posterior(which: str) -> Any:
        a, b = inputs[f"{which}_prior"]
        return stats.beta(a + girls, b + births - girls)

    return (
        "share",
        posterior,
        lambda values: stats.binom.logpmf(girls, births, values),
        sy.Beta,
    )


def _deaths(case: dict[str, Any]) -> tuple[Any, ...]:
    inputs = case["inputs"]
    deaths, exposure = inputs["sum_y"], inputs["exposure"]

    def posterior(which: str) -> Any:
        shape, rate = inputs[f"{which}_prior"]
        return stats.gamma(shape + deaths, scale=1 / (rate + exposure))

    return (
        "rate",
        posterior,
        lambda values: stats.poisson.logpmf(deaths, values * exposure),
        sy.Gamma,
    )
