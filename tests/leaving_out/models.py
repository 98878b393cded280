"""Exact draws from posteriors known in closed form, with their log likelihood by observation."""

from __future__ import annotations

import math
from dataclasses import dataclass

import numpy as np
from numpy.typing import NDArray
from scipy import special

Array = NDArray[np.float64]
LOG_2PI = math.log(2 * math.pi)


def normal_log_density(y: Array, mean: Array, variance: Array | float) -> Array:
    return np.asarray(-0.5 * (LOG_2PI + np.log(variance) + (y - mean) ** 2 / variance))


@dataclass(frozen=True)
class Regression:
    """Posterior of a normal linear model: ``β | σ² ~ N(m, σ² V)``, ``σ² ~ InvGamma(a, b)``."""

    m: Array
    V: Array
    a: float
    b: float

    @classmethod
    def reference_prior(cls, X: Array, y: Array) -> Regression:
        """Flat prior on β, 1/σ² on σ²."""
        m = np.linalg.lstsq(X, y, rcond=None)[0]
        rss = float(np.sum((y - X @ m) ** 2))
        return cls(m, np.linalg.inv(X.T @ X), (len(y) - X.shape[1]) / 2, rss / 2)

    @classmethod
    def conjugate(
        cls, X: Array, y: Array, m0: Array, V0: Array, a0: float, b0: float
    ) -> Regression:
        precision = np.linalg.inv(V0)
        V = np.linalg.inv(precision + X.T @ X)
        m = V @ (precision @ m0 + X.T @ y)
        b = b0 + 0.5 * float(y @ y + m0 @ precision @ m0 - m @ np.linalg.solve(V, m))
        return cls(m, V, a0 + len(y) / 2, b)

    def draws(self, rng: np.random.Generator, count: int) -> dict[str, Array]:
        variance = self.b / rng.gamma(self.a, size=count)
        noise = rng.normal(size=(count, len(self.m))) @ np.linalg.cholesky(self.V).T
        return {"beta": self.m + np.sqrt(variance)[:, None] * noise, "variance": variance}


def regression_loglik(draws: dict[str, Array], X: Array, y: Array) -> Array:
    return normal_log_density(y, draws["beta"] @ X.T, draws["variance"][:, None])


def known_sigma_draws(
    X: Array, y: Array, sigma: float, rng: np.random.Generator, count: int
) -> dict[str, Array]:
    """Flat prior, σ known."""
    m = np.linalg.lstsq(X, y, rcond=None)[0]
    root = sigma * np.linalg.cholesky(np.linalg.inv(X.T @ X))
    return {"beta": m + rng.normal(size=(count, len(m))) @ root.T}


def poisson_loglik(rate: Array, y: Array) -> Array:
    return np.asarray(y * np.log(rate)[:, None] - rate[:, None] - special.gammaln(y + 1))


def eight_schools(
    y: Array, s: Array, scale: float, rng: np.random.Generator, count: int
) -> dict[str, Array]:
    """Flat prior on mu, half-Cauchy on tau; tau by its distribution function on a fine grid."""
    log_tau = np.linspace(-20, 12, 40001)
    tau = np.exp(log_tau)
    variance = tau[:, None] ** 2 + s**2
    precision = (1 / variance).sum(axis=1)
    centre = (y / variance).sum(axis=1) / precision
    log_density = -np.log1p((tau / scale) ** 2) - 0.5 * np.log(precision) + log_tau
    log_density += -0.5 * (np.log(variance) + (y - centre[:, None]) ** 2 / variance).sum(axis=1)
    mass = np.cumsum(np.exp(log_density - log_density.max()))
    drawn = np.exp(np.interp(rng.random(count), mass / mass[-1], log_tau))
    v = drawn[:, None] ** 2 + s**2
    p = (1 / v).sum(axis=1)
    mu = (y / v).sum(axis=1) / p + rng.normal(size=count) / np.sqrt(p)
    own = 1 / (1 / s**2 + 1 / drawn[:, None] ** 2)
    mean = own * (y / s**2 + mu[:, None] / drawn[:, None] ** 2)
    theta = mean + np.sqrt(own) * rng.normal(size=(count, len(y)))
    return {"mu": mu, "tau": drawn, "theta": theta}
