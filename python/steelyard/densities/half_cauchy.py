"""The half-Cauchy distribution."""

from __future__ import annotations

import math
from dataclasses import dataclass
from typing import Any, ClassVar

import numpy as np

from steelyard.densities.distribution import Array, Distribution, Hyperparameter

__all__ = ["HalfCauchy"]


@dataclass(frozen=True)
class HalfCauchy(Distribution):
    """
    Half-Cauchy distribution on ``[0, ∞)``.

    Parameters
    ----------
    scale : float, array_like or str
        Scale (its median), positive.

    Raises
    ------
    ArgumentError
        For a scale that is not positive.

    Notes
    -----
    ``log p(x) = log(2/π) − log scale − log(1 + (x/scale)²)`` for x ≥ 0.

    Examples
    --------
    >>> import steelyard as sy
    >>> float(sy.HalfCauchy(0.05).log_density(0.05).round(6))
    1.851002
    """

    scale: Hyperparameter
    domains: ClassVar = {"scale": "positive"}

    def _log_density(self, x: Array, *hyper: Array) -> Array:
        (scale,) = hyper
        # Squares overflow beyond 1e154; there log1p(z²) is 2 log z to the last digit.
        z = np.abs(x / scale)
        tail = np.where(z > 1e100, 2 * np.log(np.maximum(z, 1.0)), np.log1p(z**2))
        return math.log(2 / math.pi) - np.log(scale) - tail

    def _support(self, *hyper: Array) -> tuple[Any, Any]:
        return 0.0, math.inf
