"""The multi-sample equations: relative constants from draws of each density, and their series."""

from __future__ import annotations

from dataclasses import dataclass, replace

import numpy as np
import numpy.typing as npt

from steelyard import _core
from steelyard.arrays import Frozen
from steelyard.base.draws import Array
from steelyard.base.pooling import Pooling

__all__ = ["Solved", "solve"]


@dataclass(frozen=True, eq=False)
class Solved(Frozen):
    """Constants and shares of several densities from draws of each."""

    # Minus the log constants, the first at 0.
    constants: Array
    shares: Array
    log_mixture: Array
    # Influence series of `constants`, centred within the fits, ``(n, fits)``.
    series: Array


def solve(
    log_q: Array,
    edges: npt.NDArray[np.int64],
    own: Array,
    sizes: Array,
    given: Array | None = None,
) -> tuple[Pooling, Solved]:
    """
    Relative constants of unnormalised densities from draws of each, and how they were pooled.

    Parameters
    ----------
    log_q : numpy.ndarray
        Log density of each fit at all draws, ``(n, K)``.
    edges : numpy.ndarray
        Where the draws of each fit start, and n at the end.
    own : numpy.ndarray
        Weights within each fit, which sum to one there.
    sizes : numpy.ndarray
        Effective sizes.
    given : numpy.ndarray, optional
        Log constants that are known.
    """
    lengths = np.diff(edges)
    counts = own * np.repeat(sizes, lengths)
    start = np.empty(len(sizes))
    for fit in range(len(sizes)):
        rows = slice(int(edges[fit]), int(edges[fit + 1]))
        positive = own[rows] > 0
        start[fit] = -(own[rows][positive] @ log_q[rows, fit][positive])
    begin = start if given is None else -given
    constants, shares, log_mixture, _ = _core.multi_sample(
        np.ascontiguousarray(log_q), counts, sizes, begin, given is None
    )
    blank = np.zeros_like(shares)
    ordered = (True,) * len(sizes)
    pooling = Pooling(edges, ordered, own, counts, shares, blank, (), False)
    series = blank
    if given is None:
        weighted = counts[:, None] * shares
        curve = np.diag(weighted.sum(axis=0)) - shares.T @ weighted
        inverse = np.linalg.pinv(curve[1:, 1:], rcond=1e-13, hermitian=True)
        moved = -len(log_q) * pooling.centred(weighted)[:, 1:] @ inverse
        series = np.concatenate([blank[:, :1], moved], axis=1)
    pooling = replace(pooling, constants=series)
    return pooling, Solved(constants, shares, log_mixture, series)
