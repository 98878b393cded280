"""Exponential tilts of weighted draws: ``w ∝ v exp(t f)``."""

from __future__ import annotations

import math
from collections.abc import Callable

import numpy as np

from steelyard import _core
from steelyard.base.draws import Array

__all__ = ["Tilt", "find_root", "tilt_to_divergence", "tilt_to_mean"]

# From this exponent on a single draw holds all weight to the last bit.
_LARGEST = 1e6


class Tilt:
    """A tilted sample: its log ratio, mean, log mean of the ratio, and divergence."""

    def __init__(self, f: Array, log_base: Array, t: float) -> None:
        self.t = t
        self.log_ratio = t * f
        total = self.log_ratio + log_base
        self.log_mean = float(_core.log_sum_exp(total[:, None])[0])
        w = np.exp(total - self.log_mean)
        self.mean = float(_core.weighted_mean(f[:, None], w / w.sum())[0])

    @property
    def divergence(self) -> float:
        """``t E_t f − log E exp(t f)``."""
        return max(self.t * self.mean - self.log_mean, 0.0)


def tilt_to_mean(f: Array, log_base: Array, target: float) -> float:
    """The t at which the tilted mean is `target`, strictly inside the range of the draws."""
    return find_root(lambda t: Tilt(f, log_base, t).mean - target, _first_step(f, log_base))


def tilt_to_divergence(f: Array, log_base: Array, divergence: float, sign: float) -> float:
    """
    The t of that sign at which the tilt's divergence is `divergence`.

    Infinite where even all weight on the largest (smallest) draw diverges less.
    """
    top = f == (f.max() if sign > 0 else f.min())
    most = -float(_core.log_sum_exp(log_base[top][:, None])[0])
    if divergence >= most * (1 - 1e-9):
        return sign * math.inf
    gap = find_root(
        lambda t: Tilt(f, log_base, sign * t).divergence - divergence,
        math.sqrt(2 * divergence) * _first_step(f, log_base),
        lowest=0.0,
    )
    return sign * gap


def _first_step(f: Array, log_base: Array) -> float:
    v = np.exp(log_base)
    mean = float(_core.weighted_mean(f[:, None], v)[0])
    return 1 / math.sqrt(float(_core.weighted_mean(((f - mean) ** 2)[:, None], v)[0]))


def find_root(rising: Callable[[float], float], step: float, lowest: float | None = None) -> float:
    """Root of a rising function: outwards in doubling steps, then false position and halving."""
    low, high = (-step if lowest is None else lowest), step
    at_low, at_high = rising(low), rising(high)
    while at_high < 0 and high < _LARGEST * step:
        low, at_low, high = high, at_high, 2 * high
        at_high = rising(high)
    while lowest is None and at_low > 0 and low > -_LARGEST * step:
        high, at_high, low = low, at_low, 2 * low
        at_low = rising(low)
    for turn in range(200):
        if at_low == 0 or high - low <= 1e-15 * max(abs(low), abs(high), 1e-300):
            return low
        if at_high == 0:
            return high
        # Every third step halves, so that a flat side cannot hold the search up.
        share = -at_low / (at_high - at_low) if turn % 3 and math.isfinite(at_high) else 0.5
        middle = low + min(max(share, 1e-3), 1 - 1e-3) * (high - low)
        if turn % 3 and turn > 60:
            middle = (low + high) / 2
        value = rising(middle)
        if abs(value) <= 1e-14:
            return middle
        low, at_low, high, at_high = (
            (middle, value, high, at_high) if value < 0 else (low, at_low, middle, value)
        )
    return (low + high) / 2
