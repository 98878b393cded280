"""Exact draws of two models whose posteriors are known, and faults planted in what is claimed."""

from __future__ import annotations

import numpy as np
import numpy.typing as npt

import steelyard as sy

Array = npt.NDArray[np.float64]
SIZE = 4000
GROUPS = 8
READING_SD = np.full(GROUPS, 0.02)


def _hierarchy(rng: np.random.Generator, y: Array, *, jacobian: bool) -> tuple[Array, ...]:
    """
    y_j ~ N(rate_j, s²), rate_j ~ N(mu, tau²), mu ~ N(0.1, 0.1²), tau ~ HalfNormal(0.05).

    Exact by inverting the distribution function of tau on a fine grid, then normal conditionals;
    without the Jacobian the density of tau is taken on the log scale by mistake.
    """
    tau_grid = np.exp(np.linspace(np.log(1e-4), np.log(0.5), 4000))
    v = tau_grid[:, None] ** 2 + READING_SD**2
    precision = 1 / 0.1**2 + (1 / v).sum(axis=1)
    mean = (0.1 / 0.1**2 + (y / v).sum(axis=1)) / precision
    log_p = (
        -0.5 * (tau_grid / 0.05) ** 2
        - 0.5 * np.log(v).sum(axis=1)
        - 0.5 * np.log(precision)
        - 0.5 * ((y**2 / v).sum(axis=1) + 0.1**2 / 0.1**2 - mean**2 * precision)
        + (np.log(tau_grid) if jacobian else 0.0)
    )
    cumulated = np.cumsum(np.exp(log_p - log_p.max()))
    tau = np.interp(rng.random(SIZE), cumulated / cumulated[-1], tau_grid)
    v = tau[:, None] ** 2 + READING_SD**2
    precision = 1 / 0.1**2 + (1 / v).sum(axis=1)
    mu = (0.1 / 0.1**2 + (y / v).sum(axis=1)) / precision
    mu = mu + rng.normal(size=SIZE) / np.sqrt(precision)
    within = 1 / tau[:, None] ** 2 + 1 / READING_SD**2
    rate = (mu[:, None] / tau[:, None] ** 2 + y / READING_SD**2) / within
    return tau, mu, rate + rng.normal(size=rate.shape) / np.sqrt(within)


def hierarchy(seed: int, fault: str = "") -> sy.Fit:
    """A hierarchical fit of four chains, with one fault planted."""
    rng = np.random.default_rng(seed)
    y = 0.1 + 0.03 * rng.normal(size=GROUPS)
    tau, mu, rate = _hierarchy(rng, y, jacobian=fault != "Jacobian missing")
    loglik = -0.5 * ((y - rate) / READING_SD) ** 2 - np.log(READING_SD)
    loglik = loglik.reshape(4, -1, GROUPS)
    if fault == "rows misordered":
        loglik = np.ascontiguousarray(loglik.transpose(1, 0, 2)).reshape(4, -1, GROUPS)
    scale = {"wrong hyperprior": 0.02, "hyperprior doubled": 0.05 / np.sqrt(2)}.get(fault, 0.05)
    return sy.Fit(
        {
            "rate": rate.reshape(4, -1, GROUPS),
            "mu": mu.reshape(4, -1),
            "tau": tau.reshape(4, -1),
        },
        prior={
            "rate": sy.Normal("mu", "tau"),
            "mu": sy.Normal(0.1, 0.1),
            "tau": sy.HalfNormal(scale),
        },
        loglik=loglik,
    )


def regression(seed: int, fault: str = "", *, stored: str = "") -> sy.Fit:
    """Five coefficients under N(0, 0.5²) priors, known noise; one fault, or a stored density."""
    rng = np.random.default_rng(seed)
    x = rng.normal(size=(30, 5))
    y = x @ (0.5 * rng.normal(size=5)) + 2 * rng.normal(size=30)
    covariance = np.linalg.inv(x.T @ x / 4 + np.eye(5) / 0.25)
    b = rng.multivariate_normal(covariance @ (x.T @ y / 4), covariance, size=SIZE)
    loglik = -0.5 * ((y - b @ x.T) / 2) ** 2
    log_prior = -0.5 * (b**2).sum(axis=1) / 0.25
    density = {
        "": None,
        "right": log_prior + loglik.sum(axis=1) + 7,
        "prior twice": 2 * log_prior + loglik.sum(axis=1),
        "likelihood left out": log_prior,
        "in another unit": log_prior + loglik.sum(axis=1) + np.log(np.exp(b[:, 0])),
    }[stored]
    sd = {"sd 0.6 claimed for 0.5": 0.6, "prior doubled": 0.5 / np.sqrt(2)}.get(fault, 0.5)
    prior = sy.Flat() if fault == "prior dropped" else sy.Normal(0, sd)
    claimed = 2 * loglik if fault == "likelihood doubled" else loglik
    return sy.Fit(
        {"b": b.reshape(4, -1, 5)},
        prior={"b": prior},
        loglik=claimed.reshape(4, -1, 30),
        stored_log_density=None if density is None else density.reshape(4, -1),
    )
