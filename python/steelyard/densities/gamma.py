"""The gamma distribution."""

from __future__ import annotations

import math
from dataclasses import dataclass
from typing import Any, ClassVar

import numpy as np

from steelyard.densities.distribution import Array, Distribution, Hyperparameter
from steelyard.densities.special import log_gamma, x_log_y

__all__ = ["Gamma"]


@dataclass(frozen=True)
class Gamma(Distribution):
    """
    Gamma distribution on ``[0, ∞)``.

    Parameters
    ----------
    shape : float, array_like or str
        Shape, positive.
    rate : float, array_like or str
        Rate (one over the scale), positive.

    Raises
    ------
    ArgumentError
        For a hyperparameter outside its range.

    Notes
    -----
    ``log p(x) = a log b − log Γ(a) + (a − 1) log x − b x`` with shape a and rate b.

    Examples
    --------
    >>> import steelyard as sy
    >>> float(sy.Gamma(1, 2).log_density(0.0).round(6))
    0.693147
    """

    shape: Hyperparameter
    rate: Hyperparameter
    domains: ClassVar = {"shape": "positive", "rate": "positive"}

    def _log_density(self, x: Array, *hyper: Array) -> Array:
        shape, rate = hyper
        return shape * np.log(rate) - log_gamma(shape) + x_log_y(shape - 1, x) - rate * x

    def _support(self, *hyper: Array) -> tuple[Any, Any]:
        return 0.0, math.inf
