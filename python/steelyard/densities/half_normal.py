"""The half-normal distribution."""

from __future__ import annotations

import math
from dataclasses import dataclass
from typing import Any, ClassVar

import numpy as np

from steelyard.densities.distribution import Array, Distribution, Hyperparameter

__all__ = ["HalfNormal"]


@dataclass(frozen=True)
class HalfNormal(Distribution):
    """
    Half-normal distribution on ``[0, ∞)``.

    Parameters
    ----------
    scale : float, array_like or str
        Standard deviation of the normal that is folded, positive.

    Raises
    ------
    ArgumentError
        For a scale that is not positive.

    Notes
    -----
    ``log p(x) = −½(x/scale)² − log scale + ½ log(2/π)`` for x ≥ 0.

    Examples
    --------
    >>> import steelyard as sy
    >>> float(sy.HalfNormal(1).log_density(-1.0))
    -inf
    """

    scale: Hyperparameter
    domains: ClassVar = {"scale": "positive"}

    def _log_density(self, x: Array, *hyper: Array) -> Array:
        (scale,) = hyper
        return -0.5 * (x / scale) ** 2 - np.log(scale) + 0.5 * math.log(2 / math.pi)

    def _support(self, *hyper: Array) -> tuple[Any, Any]:
        return 0.0, math.inf
