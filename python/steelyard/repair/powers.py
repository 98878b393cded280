"""Powers of weights on which enough draws count."""

from __future__ import annotations

import numpy as np

from steelyard import _core
from steelyard.base import Base
from steelyard.base.draws import Array

__all__ = ["partial_power"]

# Share of the draws that the weights, or a power of them, keep while a map is estimated.
_SHARE = 0.25


def partial_power(log_ratio: Array, record: Base) -> tuple[float, Array]:
    """The largest power of the weights at which enough draws count, and those weights."""
    v = record.log_weights
    floor = _SHARE * _size(np.zeros(len(log_ratio)), v, 0.0)
    if _size(log_ratio, v, 1.0) >= floor:
        return 1.0, np.exp(_logs(log_ratio, v, 1.0))
    low, high = 0.0, 1.0
    for _ in range(40):
        middle = (low + high) / 2
        if _size(log_ratio, v, middle) >= floor:
            low = middle
        else:
            high = middle
    return low, np.exp(_logs(log_ratio, v, low))


def _logs(log_ratio: Array, log_weights: Array | None, power: float) -> Array:
    total = np.where(log_ratio > -np.inf, power * log_ratio, -np.inf)
    if log_weights is not None:
        total = total + log_weights
    return np.asarray(total - _core.log_sum_exp(np.ascontiguousarray(total)[:, None])[0])


def _size(log_ratio: Array, log_weights: Array | None, power: float) -> float:
    return float(_core.effective_size(_logs(log_ratio, log_weights, power)[:, None], False)[0])
