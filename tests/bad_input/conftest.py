"""A small fit of invented quay readings that the tests of this folder break."""

from __future__ import annotations

import numpy as np
import pytest

import steelyard as sy

CHAINS, DRAWS, QUAYS = 4, 50, 3


@pytest.fixture(scope="session")
def draws() -> dict[str, np.ndarray]:
    rng = np.random.default_rng(20_261_220)
    return {
        "mu": rng.normal(0.10, 0.02, size=(CHAINS, DRAWS)),
        "tau": rng.gamma(4, 0.01, size=(CHAINS, DRAWS)),
        "rate": rng.normal(0.10, 0.06, size=(CHAINS, DRAWS, QUAYS)),
    }


@pytest.fixture(scope="session")
def loglik() -> dict[str, np.ndarray]:
    rng = np.random.default_rng(20_261_221)
    return {
        "gauge A": -1 + 0.1 * rng.normal(size=(CHAINS, DRAWS, 5)),
        "gauge B": -1 + 0.1 * rng.normal(size=(CHAINS, DRAWS, 2)),
    }


@pytest.fixture(scope="session")
def fit(draws: dict[str, np.ndarray], loglik: dict[str, np.ndarray]) -> sy.Fit:
    prior = {
        "rate": sy.Normal("mu", "tau"),
        "mu": sy.Normal(0.1, 0.1),
        "tau": sy.HalfNormal(0.05),
    }
    return sy.Fit(draws, prior, loglik)
