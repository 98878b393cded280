"""Whether the target goes on beyond the draws that were mapped to it."""

from __future__ import annotations

import math
from collections.abc import Callable

import numpy as np
import numpy.typing as npt

from steelyard import _core
from steelyard.base.draws import Array
from steelyard.repair.affine import Affine
from steelyard.verdicts import Finding, judge

__all__ = ["probe", "probe_cost"]

# Draws that are pushed outwards, as a share of all, and at least so many.
_SHARE = 4
_LEAST = 500


def _probed(count: int) -> int:
    return min(count, max(count // _SHARE, _LEAST))


def probe_cost(count: int) -> int:
    """Points that a probe of so many draws evaluates."""
    return 2 * _probed(count)


def probe(
    start: Array,
    base: Array,
    log_ratio: Array,
    log_weights: Array | None,
    maps: tuple[Affine, Affine],
    halves: tuple[npt.NDArray[np.int64], npt.NDArray[np.int64]],
    densities: Callable[[Array], tuple[Array, Array]],
) -> Finding:
    """
    Hold the variance of the weights against what draws further out say of it.

    Some draws are pushed away from the mean of the base by a factor c. They are draws of
    ``p_c(x) = p(m + (x − m)/c)/c^d``, so that with r the weights, target over mapped base, the mean
    of ``r² p/p_c`` over them and that of r² over the draws themselves estimate the same second
    moment. Where the former is larger, the target has tails that the draws do not reach and their
    tail shape does not show (*derived*). The factor is ``1 + 1/√d``: further out too few of the
    pushed draws would count.
    """
    size = start.shape[1]
    factor = 1 + 1 / math.sqrt(size)
    rows = np.linspace(0, len(start) - 1, _probed(len(start))).astype(np.int64)
    v = np.zeros(len(start)) if log_weights is None else log_weights
    centre = np.exp(v - v.max()) @ start / np.exp(v - v.max()).sum()
    pushed = centre + factor * (start[rows] - centre)
    image, log_determinant = np.empty_like(pushed), np.empty(len(rows))
    for map_, half in zip(maps, halves, strict=True):
        own = np.isin(rows, half)
        image[own] = map_(pushed[own])
        log_determinant[own] = map_.log_determinant
    there = densities(pushed)[0]
    with np.errstate(invalid="ignore"):
        reached = densities(image)[1] + log_determinant - there
        beyond = 2 * reached + there - base[rows] + size * math.log(factor)
    # Where the base has no density it proposes nothing, and the weights are not in question.
    beyond = np.where(there > -np.inf, beyond, -np.inf)
    seen = _log_mean(2 * log_ratio, v)
    figure = math.exp(min(_log_mean(beyond, v[rows]) - seen, 700.0))
    return judge("tail_beyond", figure, factor=f"{factor:.2f}")


def _log_mean(logs: Array, log_weights: Array) -> float:
    total = np.where(log_weights > -np.inf, logs + log_weights, -np.inf)
    both = np.stack([total, log_weights], axis=1)
    if not (total > -np.inf).any():
        return -math.inf
    above, below = _core.log_sum_exp(np.ascontiguousarray(both))
    return float(above - below)
