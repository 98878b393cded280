"""The ratio of constants of two temperatures from the particles of both."""

from __future__ import annotations

import math

import numpy as np

from steelyard import _core
from steelyard.base.draws import Array

__all__ = ["bridge"]

_ROUNDS = 100
_CLOSE = 1e-12


def bridge(
    lower: tuple[Array, Array], upper: tuple[Array, Array], step: float, islands: int
) -> tuple[float, Array]:
    """
    Log ratio of constants by Meng and Wong's bridge, and what each island adds to it, centred.

    With ``l = exp(Δλ ℓ)`` and weights W that add up to one, r solves
    ``Σ_lower W l/(l + r) = r Σ_upper W/(l + r)`` [1]_. Both sides are bounded: unlike the mean of l
    it has a variance whatever the tails of source and target. The derivative of either side in r
    does not count to first order, so that an island adds ``W(l/(l + r))/Σ − W(r/(l + r))/Σ``.

    Parameters
    ----------
    lower, upper : tuple of numpy.ndarray
        Log weights and log ratios ℓ of the particles before the step and after its moves.
    step : float
        Δλ.
    islands : int
        Number of islands, contiguous.

    Returns
    -------
    float
        log r.
    numpy.ndarray
        Influence of each island, shape ``(islands,)``; its sum is zero.

    References
    ----------
    .. [1] Meng, Wong (1996), Statistica Sinica 6.
    """
    w0, w1 = _linear(lower[0]), _linear(upper[0])
    a, b = step * lower[1], step * upper[1]
    finite = a > -np.inf
    # The mean of l begins; every round contracts towards the root.
    log_r = float(_core.log_sum_exp((np.log(w0[finite]) + a[finite])[:, None])[0])
    for _ in range(_ROUNDS):
        up, down = w0 @ _share(a - log_r), w1 @ _share(log_r - b)
        if not (up > 0 and down > 0):
            break
        change = math.log(up / down)
        log_r += change
        if abs(change) < _CLOSE:
            break
    ups = (w0 * _share(a - log_r)).reshape(islands, -1).sum(axis=1)
    downs = (w1 * _share(log_r - b)).reshape(islands, -1).sum(axis=1)
    held, reached = (w.reshape(islands, -1).sum(axis=1) for w in (w0, w1))
    return log_r, (ups / ups.sum() - held) - (downs / downs.sum() - reached)


def _linear(log_weights: Array) -> Array:
    w = np.exp(log_weights - log_weights.max())
    return np.asarray(w / w.sum())


def _share(x: Array) -> Array:
    """``1/(1 + exp(−x))``."""
    return np.asarray(0.5 * (1 + np.tanh(0.5 * x)))
