"""From log ratios to weights: smoothed, normalised, and described."""

from __future__ import annotations

import math
from dataclasses import dataclass

import numpy as np

from steelyard import _core
from steelyard.arrays import Frozen
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
    log : numpy.ndarray
        Smoothed, normalised log weights ``(n,)``, base weights included.
    linear : numpy.ndarray
        Their exponentials.
    raw : numpy.ndarray
        Normalised weights before smoothing, ``(n,)``.
    log_mean_ratio : float
        ``log Σ v exp ℓ`` with the base weights v: log ratio of constants.
    tail_shape : float
        Tail shape of the raw weights.
    effective_size, entropy_size, largest_share : float
        Of the smoothed weights.
    """

    log: Array
    linear: Array
    raw: Array
    log_mean_ratio: float
    tail_shape: float
    effective_size: float
    entropy_size: float
    largest_share: float


def base_weights(base: Base) -> Weights:
    """
    The weights of the base: equal, or those that the draws came with.

    Weights that correct an approximation are smoothed like any; given ones are left as they are.
    """
    draws, given = base.draws, base.log_weights
    if given is None:
        return _describe(np.zeros(draws.size), np.zeros(draws.size), draws, -math.inf, 0.0)
    if base.is_approximate:
        return weigh_ratio(given, None, draws, ordered=base.ordered)
    efficiency = relative_efficiency(np.exp(given - given.max())[:, None], draws, base.ordered)
    shape = float(_core.tail_shape(np.ascontiguousarray(given)[:, None], efficiency)[0])
    return _describe(given, given, draws, shape, 0.0)


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
    refuse_bad_ratio(log_ratio, draws, "log ratio")
    total = log_ratio if log_weights is None else log_ratio + log_weights
    refuse_bad_ratio(total, draws, "log ratio with base weights")
    base = log_weights if base_weights is None else base_weights
    base_sum = math.log(draws.size) if base is None else float(_core.log_sum_exp(base[:, None])[0])
    log_mean = float(_core.log_sum_exp(total[:, None])[0]) - base_sum
    with np.errstate(over="ignore"):  # −inf is then what is meant
        raw = np.exp(total - total.max())
    efficiency = relative_efficiency(raw[:, None], draws, ordered)
    out = np.empty((draws.size, 1))
    shape = float(_core.smooth(np.ascontiguousarray(total)[:, None], efficiency, out)[0])
    return _describe(out[:, 0] if smooth else total, total, draws, shape, log_mean)


def _describe(log: Array, total: Array, draws: Draws, shape: float, log_mean: float) -> Weights:
    column = np.empty((draws.size, 1))
    _core.normalise(np.ascontiguousarray(log)[:, None], column)
    raw = np.empty((draws.size, 1))
    _core.normalise(np.ascontiguousarray(total)[:, None], raw)
    linear = np.exp(column[:, 0])
    return Weights(
        column[:, 0],
        linear,
        np.exp(raw[:, 0]),
        log_mean,
        shape,
        float(_core.effective_size(column, False)[0]),
        float(_core.effective_size(column, True)[0]),
        float(_core.largest_share(column)[0]),
    )
