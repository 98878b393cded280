"""Normal means of known noise: their posteriors and constants are known exactly."""

from __future__ import annotations

from collections.abc import Sequence

import numpy as np

import steelyard as sy

# One reading of thickness loss on a quay wall, in units of its noise.
READING = 1.0


def posterior(sd: float) -> tuple[float, float]:
    """Mean and sd of the posterior under a prior N(0, sd²)."""
    precision = 1 + 1 / sd**2
    return READING / precision, precision**-0.5


def log_constant(sd: float) -> float:
    """Log marginal likelihood under that prior, up to what all priors share."""
    return -0.5 * np.log(1 + sd**2) - 0.5 * READING**2 / (1 + sd**2)


def chains(rng: np.random.Generator, shape: tuple[int, int], correlation: float) -> np.ndarray:
    """Standard normal chains of first-order autocorrelation, stationary from the start."""
    noise = rng.normal(size=shape)
    out = np.empty(shape)
    out[:, 0] = noise[:, 0]
    for t in range(1, shape[1]):
        out[:, t] = correlation * out[:, t - 1] + np.sqrt(1 - correlation**2) * noise[:, t]
    return out


def fitted(
    rng: np.random.Generator,
    sd: float,
    draws: int = 500,
    correlation: float = 0.0,
    shift: float = 0.0,
) -> sy.Fit:
    """A fit with exact draws, its likelihood an array."""
    mean, spread = posterior(sd)
    mu = mean + shift + spread * chains(rng, (4, draws), correlation)
    loglik = -0.5 * (READING - mu[..., None]) ** 2
    return sy.Fit({"mu": mu}, {"mu": sy.Normal(0, sd)}, {"gauge A": loglik})


def pooled(
    rng: np.random.Generator,
    sds: Sequence[float],
    draws: Sequence[int],
    correlations: Sequence[float],
) -> sy.Pool:
    """Fits under several priors, of unequal length and mixing, as a pool."""
    fits = [fitted(rng, *case) for case in zip(sds, draws, correlations, strict=True)]
    return sy.pool(fits, data="same", common="gauge A")
