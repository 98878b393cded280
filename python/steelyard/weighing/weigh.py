"""From log ratios to weights: smoothed, normalised, and described."""

from __future__ import annotations

import math
from dataclasses import dataclass
from functools import cached_property, lru_cache

import numpy as np

from steelyard import _core
from steelyard.arrays import Frozen, frozen
from steelyard.base import Base, Draws
from steelyard.base.draws import Array
from steelyard.base.ratios import refuse_bad_ratio
from steelyard.weighing.series import relative_efficiency

__all__ = ["Weights", "base_weights", "weigh_ratio"]


@dataclass(frozen=True, eq=False)
class Weights(Frozen):
    """
    Weights of the draws.

    Attributes
    ----------
    total : numpy.ndarray
        Log weights up to a constant, before smoothing, base weights included, ``(n,)``.
    linear : numpy.ndarray
        Smoothed, normalised weights.
    raw : numpy.ndarray
        Normalised weights before smoothing, ``(n,)``.
    log_mean_ratio : float
        ``log Σ v exp ℓ`` with the base weights v: log ratio of constants.
    tail_shape : float
        Tail shape of the raw weights.
    effective_size, entropy_size, largest_share : float
        Of the smoothed weights.
    raw_size : float
        Effective size of the raw weights.
    efficiency : float
        Relative efficiency of the draws for the raw weights.
    is_smoothed : bool
        Whether the largest weights were smoothed.
    """

    total: Array
    linear: Array
    raw: Array
    log_mean_ratio: float
    tail_shape: float
    effective_size: float
    entropy_size: float
    largest_share: float
    raw_size: float
    efficiency: float
    is_smoothed: bool

    @cached_property
    def log(self) -> Array:
        """Smoothed, normalised log weights, base weights included, ``(n,)``."""
        column = np.ascontiguousarray(self.total)[:, None]
        out = np.empty(column.shape)
        if self.is_smoothed:
            _core.smooth(column, np.array([self.efficiency]), out)
        else:
            _core.normalise(column, out)
        return frozen(out[:, 0])


def base_weights(base: Base) -> Weights:
    """
    The weights of the base: equal, or those that the draws came with.

    Weights that correct an approximation are smoothed like any; given ones are left as they are.
    """
    draws, given = base.draws, base.log_weights
    if given is None:
        return _equal(draws.size)
    if base.is_approximate:
        return weigh_ratio(given, None, draws, ordered=base.ordered)
    raw = np.empty(given.shape)
    figures, _ = _core.weigh(given, raw)
    efficiency = float(relative_efficiency(raw[:, None], draws, base.ordered)[0])
    column = np.ascontiguousarray(given)[:, None]
    shape = float(_core.tail_shape(column, np.array([efficiency]))[0])
    _, size, entropy, largest = figures
    return Weights(
        given, raw, raw, 0.0, shape, size, entropy, largest, size, efficiency, is_smoothed=False
    )


@lru_cache(maxsize=64)
def _equal_weight(count: int) -> float:
    """The weight of ratios that are all the same, to the last bit."""
    raw = np.empty(count)
    _core.weigh(np.zeros(count), raw)
    return float(raw[0])


def _equal(count: int) -> Weights:
    # Arrays of one repeated number, which take no memory.
    equal = np.array([_equal_weight(count)])
    entropy = math.exp(math.log(count))
    return Weights(
        np.broadcast_to(np.zeros(1), (count,)),
        np.broadcast_to(equal, (count,)),
        np.broadcast_to(equal, (count,)),
        0.0,
        -math.inf,
        float(count),
        entropy,
        1 / count,
        float(count),
        1.0,
        is_smoothed=False,
    )


def weigh_ratio(
    log_ratio: Array,
    log_weights: Array | None,
    draws: Draws,
    *,
    ordered: bool = True,
    smooth: bool = True,
    base_weights: Array | None = None,
) -> Weights:
    """
    Weights of the target from log ratios and base log weights.

    Parameters
    ----------
    log_ratio : numpy.ndarray
        ℓ, shape ``(n,)``.
    log_weights : numpy.ndarray or None
        Base log weights.
    draws : Draws
        For the chains and for words in errors.
    ordered : bool
        Whether autocorrelation counts.
    smooth : bool
        Whether the largest weights are smoothed.
    base_weights : numpy.ndarray, optional
        Log weights whose sum stands for the base, where these differ from `log_weights`.

    Returns
    -------
    Weights
        The weights.
    """
    total = log_ratio if log_weights is None else log_ratio + log_weights
    raw = np.empty(total.shape)
    figures, sums = _core.weigh(total, raw)
    log_sum, raw_size, *_ = figures
    if log_weights is not None or not math.isfinite(log_sum):
        refuse_bad_ratio(log_ratio, draws, "log ratio")
        refuse_bad_ratio(total, draws, "log ratio with base weights")
    base = log_weights if base_weights is None else base_weights
    base_sum = math.log(draws.size) if base is None else float(_core.log_sum_exp(base[:, None])[0])
    efficiency = float(relative_efficiency(raw[:, None], draws, ordered)[0])
    linear = np.empty(draws.size)
    shape, smoothed = _core.smooth_weights(total, raw, sums, efficiency, linear)
    if smooth:
        figures = smoothed
    _, size, entropy, largest = figures
    return Weights(
        frozen(total),
        linear if smooth else raw,
        raw,
        log_sum - base_sum,
        shape,
        size,
        entropy,
        largest,
        raw_size,
        efficiency,
        is_smoothed=bool(smooth),
    )
