"""Shares of draws in a pool that serve the worst served scenario best."""

from __future__ import annotations

import numpy as np

from steelyard.base.draws import Array

__all__ = ["best_shares", "costs_of"]

_STEPS = 400
# The search ends where the best has not grown by this share for so many steps.
_GAIN, _PATIENCE = 1e-4, 40


def costs_of(squares: Array, weights: Array, shares: Array) -> Array:
    """
    Draws that each scenario asks for against draws of its own, ``Σ w_b²/Σ_a π_a w_a``.

    Parameters
    ----------
    squares : numpy.ndarray
        Squared weights of the scenarios, ``(n, B)``.
    weights : numpy.ndarray
        Weights of what may be in the pool, ``(n, A)``.
    shares : numpy.ndarray
        Their shares, ``(A,)``.
    """
    mixture = weights @ shares
    with np.errstate(divide="ignore", invalid="ignore"):
        parts = squares / mixture[:, None]
    return np.asarray(np.where(squares > 0, parts, 0.0).sum(axis=0))


def best_shares(squares: Array, weights: Array) -> tuple[Array, Array]:
    """
    Shares that make the largest of `costs_of` smallest, and the costs.

    The costs are convex in the shares. Scenarios are weighed by multipliers that grow where the
    cost is high, and shares move by the square root of their use: a rule that never raises the
    weighed sum (Silvey, Titterington, Torsney 1978, Communications in Statistics A 7; Yu 2010,
    Annals of Statistics 38).
    """
    count = weights.shape[1]
    shares = np.full(count, 1 / count)
    multipliers = np.full(squares.shape[1], 1 / squares.shape[1])
    best = costs_of(squares, weights, shares)
    kept, since = shares, 0
    for _ in range(_STEPS):
        mixture = weights @ shares
        safe = np.where(mixture > 0, mixture, np.inf)
        use = ((squares @ multipliers) / safe**2) @ weights
        shares = shares * np.sqrt(use)
        shares = shares / shares.sum()
        costs = costs_of(squares, weights, shares)
        most = costs[np.isfinite(costs)].max(initial=1.0)
        multipliers = multipliers * np.where(np.isfinite(costs), costs, most)
        multipliers = multipliers / multipliers.sum()
        since += 1
        if costs.max() < best.max():
            if costs.max() < best.max() * (1 - _GAIN):
                since = 0
            best, kept = costs, shares
        if since >= _PATIENCE:
            break
    return kept, best
