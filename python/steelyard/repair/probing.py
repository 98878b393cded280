"""Whether the target goes on beyond the draws that were mapped to it, or was left behind."""

from __future__ import annotations

import math
from collections.abc import Callable
from dataclasses import dataclass

import numpy as np

from steelyard import _core
from steelyard.base.draws import Array
from steelyard.repair.affine import Affine
from steelyard.repair.points import Rows
from steelyard.verdicts import Finding, judge

__all__ = ["DensityPair", "Mapped", "probe", "probe_behind", "probe_cost"]

# Log densities of base and target at coordinates.
DensityPair = Callable[[Array], tuple[Array, Array]]
# Draws that are pushed outwards, as a share of all, and at least so many.
_SHARE = 4
_LEAST = 500


def _probed(count: int) -> int:
    return min(count, max(count // _SHARE, _LEAST))


def probe_cost(count: int) -> int:
    """Points that both probes of so many draws evaluate."""
    return 3 * _probed(count)


@dataclass(frozen=True, eq=False)
class Mapped:
    """
    Draws under maps.

    Attributes
    ----------
    start : numpy.ndarray
        Coordinates of the base draws, ``(n, d)``.
    base, target : numpy.ndarray
        Log densities there.
    log_ratio : numpy.ndarray
        Log weights of the mapped draws, without base weights.
    log_weights : numpy.ndarray or None
        Base log weights.
    maps : tuple of Affine
        What moved the draws of each half.
    halves : tuple of numpy.ndarray
        Their positions.
    densities : callable
        Log densities of base and target at coordinates.
    """

    start: Array
    base: Array
    target: Array
    log_ratio: Array
    log_weights: Array | None
    maps: tuple[Affine, Affine]
    halves: tuple[Rows, Rows]
    densities: DensityPair

    @property
    def base_log_weights(self) -> Array:
        """Base log weights, 0 where there are none."""
        return np.zeros(len(self.start)) if self.log_weights is None else self.log_weights


def probe(mapped: Mapped) -> Finding:
    """
    Hold the variance of the weights against what draws further out say of it.

    Some draws are pushed away from the mean of the base by a factor c. They are draws of
    ``p_c(x) = p(m + (x − m)/c)/c^d``, so that with r the weights, target over mapped base, the mean
    of ``r² p/p_c`` over them and that of r² over the draws themselves estimate the same second
    moment. Where the two differ, by whichever factor, the target has tails that the draws hardly
    reach and that their tail shape does not show (*derived*). The factor c is ``1 + 1/√d``: further
    out too few of the pushed draws would count.
    """
    start, v = mapped.start, mapped.base_log_weights
    size = start.shape[1]
    factor = 1 + 1 / math.sqrt(size)
    rows = np.linspace(0, len(start) - 1, _probed(len(start))).astype(np.int64)
    centre = np.exp(v - v.max()) @ start / np.exp(v - v.max()).sum()
    pushed = centre + factor * (start[rows] - centre)
    image, log_determinant = np.empty_like(pushed), np.empty(len(rows))
    for map_, half in zip(mapped.maps, mapped.halves, strict=True):
        own = np.isin(rows, half)
        image[own] = map_(pushed[own])
        log_determinant[own] = map_.log_determinant
    there = mapped.densities(pushed)[0]
    with np.errstate(invalid="ignore"):
        reached = mapped.densities(image)[1] + log_determinant - there
        beyond = 2 * reached + there - mapped.base[rows] + size * math.log(factor)
    # Where the base has no density it proposes nothing, and the weights are not in question.
    beyond = np.where(there > -np.inf, beyond, -np.inf)
    gap = abs(_log_mean(beyond, v[rows]) - _log_mean(2 * mapped.log_ratio, v))
    return judge("tail_beyond", math.exp(min(gap, 700.0)), factor=f"{factor:.2f}")


def probe_behind(mapped: Mapped) -> Finding:
    """
    Hold the variance of the weights against what the base's own draws say of it.

    With T the map, the mean of ``q²/(p p_T)`` over the base draws, p_T the density of mapped
    ones, is the second moment of their weights once more (*derived*): large where the target has
    mass at base draws from which the map moved away, such as another mode. The heaviest of these
    stand for all, which makes the figure a lower bound.
    """
    start, target, v = mapped.start, mapped.target, mapped.base_log_weights
    raw = np.where(v > -np.inf, target - mapped.base, -np.inf)
    rows = np.sort(np.argsort(-raw, kind="stable")[: _probed(len(start))])
    back, log_determinant = np.empty((len(rows), start.shape[1])), np.empty(len(rows))
    for map_, half in zip(mapped.maps, mapped.halves, strict=True):
        own = np.isin(rows, half)
        back[own] = map_.inverse(start[rows][own])
        log_determinant[own] = map_.log_determinant
    density = mapped.densities(back)[0] - log_determinant
    with np.errstate(invalid="ignore", over="ignore"):
        behind = np.where(raw[rows] > -np.inf, raw[rows] + target[rows] - density, -np.inf)
    whole = np.full(len(start), -np.inf)
    whole[rows] = np.minimum(behind, 1e300)
    gap = _log_mean(whole, v) - _log_mean(2 * mapped.log_ratio, v)
    return judge("mass_behind", math.exp(min(gap, 700.0)))


def _log_mean(logs: Array, log_weights: Array) -> float:
    total = np.where(log_weights > -np.inf, logs + log_weights, -np.inf)
    both = np.stack([total, log_weights], axis=1)
    if not (total > -np.inf).any():
        return -math.inf
    above, below = _core.log_sum_exp(np.ascontiguousarray(both))
    return float(above - below)
