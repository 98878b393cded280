"""Simultaneous bands: how far the largest of many dependent errors may reach."""

from __future__ import annotations

import math
from itertools import pairwise

import numpy as np
import numpy.typing as npt

from steelyard.arrays import in_unit
from steelyard.base import Draws
from steelyard.base.draws import Array

__all__ = ["batch_edges", "batch_sums", "critical_value", "joint_level"]

_BATCHES = 60
# The 95 % quantile of so many is sure to about a hundredth of itself.
_REPLICATES = 512
_KEY = 20_261_202
# Factor of a 95 % interval of one normal deviate.
_SINGLE = 1.959963984540054
# Columns of the bootstrap at a time.
_WIDTH = 512


def batch_edges(draws: Draws) -> npt.NDArray[np.int64]:
    """Edges of stretches of the chains, about sixty in all."""
    per_chain = max(2, -(-_BATCHES // draws.chains))
    parts = [
        np.linspace(start, stop, min(per_chain, stop - start) + 1).astype(np.int64)
        for start, stop in pairwise(draws.starts.tolist())
    ]
    return np.unique(np.concatenate(parts))


def batch_sums(z: Array, edges: npt.NDArray[np.int64]) -> Array:
    """Sums of the columns of `z` over the batches, ``(batches, k)``."""
    return np.asarray(np.add.reduceat(z, edges[:-1], axis=0))


def critical_value(sums: Array) -> float:
    """
    Factor of the errors that all columns keep within together, with probability 95 %.

    The sums of the influence series over batches are bootstrapped with normal multipliers, the
    same for all columns, so that the dependence between them is kept; the factor is the quantile
    of the largest studentised deviation. For one column it is near the normal's 1.96.

    Parameters
    ----------
    sums : numpy.ndarray
        ``(batches, k)``; columns that do not vary are left out.

    References
    ----------
    .. [1] Chernozhukov, Chetverikov, Kato (2013), Annals of Statistics 41.
    """
    centred, _ = in_unit(sums - sums.mean(axis=0))
    spread = np.sqrt((centred**2).sum(axis=0))
    # Seven digits are far more than the bootstrap's noise leaves.
    unit = (centred[:, spread > 0] / spread[spread > 0]).astype(np.float32)
    if not unit.shape[1]:
        return 0.0
    # A fixed stream: the same table asked twice has the same bands.
    random = np.random.default_rng(_KEY)
    multipliers = random.standard_normal((_REPLICATES, len(unit))).astype(np.float32)
    largest = np.zeros(_REPLICATES, dtype=np.float32)
    for start in range(0, unit.shape[1], _WIDTH):
        deviations = multipliers @ unit[:, start : start + _WIDTH]
        for reached in (deviations.max(axis=1), -deviations.min(axis=1)):
            largest = np.maximum(largest, reached)
    # Below the factor of a single column only the noise of the bootstrap can bring it.
    return max(float(np.quantile(largest, 0.95)), _SINGLE)


def joint_level(sums: Array) -> float:
    """
    Level of single intervals which all columns of `sums` keep within together, 95 %.

    That of :func:`critical_value` for normal deviates: intervals at this level may then use
    Student's t, each with its own degrees of freedom.
    """
    return max(0.95, math.erf(critical_value(sums) / math.sqrt(2)))
