"""Monte Carlo errors of series in chain order, and how chains differ."""

from __future__ import annotations

import numpy as np

from steelyard import _core
from steelyard.base import Draws
from steelyard.base.draws import Array

__all__ = ["chains_p_value", "long_run_variance", "relative_efficiency", "standard_error"]


def long_run_variance(z: Array, draws: Draws, ordered: bool) -> Array:
    """
    Long-run variance of the columns of `z` ``(n, k)`` over split chains.

    Draws without order have their mean square instead.
    """
    if not ordered:
        return _core.mean_square(z)
    return _core.long_run_variance(z, draws.starts, True)


def relative_efficiency(z: Array, draws: Draws, ordered: bool) -> Array:
    """``min(1, var/LRV)`` of each column, in (0, 1]; 1 for a constant."""
    if not ordered:
        return np.ones(z.shape[1])
    variance = _core.mean_square(z)
    lrv = long_run_variance(z, draws, ordered)
    with np.errstate(invalid="ignore", divide="ignore"):
        ratio = variance / lrv
    return np.where((lrv > 0) & np.isfinite(ratio) & (ratio > 0), np.minimum(ratio, 1.0), 1.0)


def standard_error(z: Array, draws: Draws, ordered: bool) -> Array:
    """
    Monte Carlo error of a mean whose influence values are `z` ``(n, k)``: ``sqrt(LRV(z)/S)``.

    References
    ----------
    .. [1] Geyer (1992), Statistical Science 7; Jones et al. (2006), JASA 101.
    """
    return np.sqrt(long_run_variance(z, draws, ordered) / draws.size)


def chains_p_value(f: Array, weights: Array, draws: Draws) -> Array:
    """
    Whether the chains agree about weighted means: p-values, one a column of `f` ``(n, k)``.

    ``Q = Σ_c (μ_c − μ̄)²/se_c²`` against chi-square with C − 1 degrees of freedom; μ̄ is the
    mean weighted by ``1/se_c²``. A chain's error is at least that of as many independent draws as
    its weights are worth: a chain that never left one value has no error of its own.
    """
    columns = f.shape[1]
    if draws.chains < 2 or int(np.diff(draws.starts).min()) < 8:
        return np.ones(columns)
    mean = _core.weighted_mean(f, weights)
    pooled = _core.weighted_mean((f - mean) ** 2, weights)
    means, precisions = [], []
    for chain in range(draws.chains):
        part = slice(int(draws.starts[chain]), int(draws.starts[chain + 1]))
        share = float(weights[part].sum())
        if share <= 0:
            continue
        w = weights[part] / share
        mu = _core.weighted_mean(f[part], w)
        count = part.stop - part.start
        with np.errstate(invalid="ignore"):
            z = np.where(w[:, None] > 0, count * w[:, None] * (f[part] - mu), 0.0)
        lrv = _core.long_run_variance(z, np.array([0, count], dtype=np.int64), True)
        variance = np.maximum(lrv / count, pooled * float((w**2).sum()))
        means.append(mu)
        precisions.append(np.where(variance > 0, 1 / np.where(variance > 0, variance, 1.0), 0.0))
    mu, precision = np.array(means), np.array(precisions)
    total = precision.sum(axis=0)
    centre = (precision * mu).sum(axis=0) / np.where(total > 0, total, 1.0)
    q = (precision * (mu - centre) ** 2).sum(axis=0)
    return _core.chi_square_tail(q, float(max(len(means) - 1, 1)))
