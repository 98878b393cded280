"""A small fit of invented readings at nine quays, by two gauges."""

from __future__ import annotations

import numpy as np
import pytest

import steelyard as sy

CHAINS, DRAWS = 4, 100


@pytest.fixture(scope="session")
def draws() -> dict[str, np.ndarray]:
    rng = np.random.default_rng(20_261_230)
    mu = rng.normal(0.10, 0.02, size=(CHAINS, DRAWS))
    tau = rng.gamma(4, 0.01, size=(CHAINS, DRAWS))
    noise = rng.normal(size=(CHAINS, DRAWS, 9))
    return {
        "rate": mu[..., None] + tau[..., None] * noise,
        "mu": mu,
        "tau": tau,
        "loss": rng.normal(size=(CHAINS, DRAWS, 2, 3)),
    }


@pytest.fixture(scope="session")
def loglik(draws: dict[str, np.ndarray]) -> dict[str, np.ndarray]:
    rng = np.random.default_rng(20_261_231)
    read_a, read_b = 0.1 + 0.03 * rng.normal(size=(2, 9))
    return {
        "gauge A": -0.5 * ((read_a - draws["rate"]) / 0.1) ** 2,
        "gauge B": -0.5 * ((read_b - draws["rate"]) / 0.2) ** 2,
    }


@pytest.fixture(scope="session")
def prior() -> dict[str, object]:
    return {
        "rate": sy.Normal("mu", "tau"),
        "mu": sy.Normal(0.1, 0.1),
        "tau": sy.HalfNormal(0.05),
    }


@pytest.fixture(scope="session")
def fit(
    draws: dict[str, np.ndarray], prior: dict[str, object], loglik: dict[str, np.ndarray]
) -> sy.Fit:
    return sy.Fit(draws, prior, loglik)


@pytest.fixture(scope="session")
def answer(fit: sy.Fit) -> sy.Answer:
    change = sy.swap_prior(tau=sy.HalfCauchy(0.05)) & sy.weigh_data({"gauge B": 0.5})
    return fit.reweigh(change)
