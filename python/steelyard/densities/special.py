"""Special functions as the densities need them."""

from __future__ import annotations

import numpy as np

from steelyard._core import ln_gamma
from steelyard.densities.distribution import Array

__all__ = ["log_gamma", "x_log_y"]


def log_gamma(x: Array) -> Array:
    """Elementwise ``log Γ(x)`` for x > 0, any shape."""
    return ln_gamma(np.ascontiguousarray(x, dtype=np.float64).reshape(-1)).reshape(np.shape(x))


def x_log_y(x: Array, y: Array) -> Array:
    """``x log y`` with 0 log 0 = 0, so that a shape of exactly one is flat at its edge."""
    return np.where(x == 0, 0.0, x * np.log(y))
