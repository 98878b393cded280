"""The beta distribution."""

from __future__ import annotations

from dataclasses import dataclass
from typing import Any, ClassVar

import numpy as np

from steelyard.densities.distribution import Array, Distribution, Hyperparameter
from steelyard.densities.special import log_gamma, x_log_y

__all__ = ["Beta"]


@dataclass(frozen=True)
class Beta(Distribution):
    """
    Beta distribution on ``[0, 1]``.

    Parameters
    ----------
    a : float, array_like or str
        First shape, positive: the density rises like ``x^(a − 1)`` from 0.
    b : float, array_like or str
        Second shape, positive: the density falls like ``(1 − x)^(b − 1)`` to 1.

    Raises
    ------
    ArgumentError
        For a shape that is not positive.

    Notes
    -----
    ``log p(x) = (a − 1) log x + (b − 1) log(1 − x) − log B(a, b)``.

    Examples
    --------
    >>> import steelyard as sy
    >>> float(sy.Beta(2, 2).log_density(0.5).round(6))
    0.405465
    """

    a: Hyperparameter
    b: Hyperparameter
    domains: ClassVar = {"a": "positive", "b": "positive"}

    def _log_density(self, x: Array, *hyper: Array) -> Array:
        a, b = hyper
        log_beta = log_gamma(a) + log_gamma(b) - log_gamma(a + b)
        upper = np.where(b == 1, 0.0, (b - 1) * np.log1p(-x))
        return x_log_y(a - 1, x) + upper - log_beta

    def _support(self, *hyper: Array) -> tuple[Any, Any]:
        return 0.0, 1.0
