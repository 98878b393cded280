"""The half-Cauchy distribution."""

from __future__ import annotations

import math
from dataclasses import dataclass
from typing import Any, ClassVar

import numpy as np

from steelyard.densities.cauchy import cauchy_rise
from steelyard.densities.cumulative import Elementwise
from steelyard.densities.hyperparameters import Array, Hyperparameter
from steelyard.densities.tails import Tails, bounded, infinite

__all__ = ["HalfCauchy"]


@dataclass(frozen=True, repr=False)
class HalfCauchy(Elementwise):
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
    family: ClassVar = "half_cauchy"

    def _gradient(self, x: Array, *hyper: Array) -> Array:
        return cauchy_rise(x / hyper[0]) / hyper[0]

    def _slopes(self, x: Array, *hyper: Array) -> dict[str, Array]:
        z = x / hyper[0]
        return {"scale": -(1 + z * cauchy_rise(z)) / hyper[0]}

    def _support(self, *hyper: Array) -> tuple[Any, Any]:
        return 0.0, math.inf

    def _tails(self, *hyper: Array) -> Tails:
        return Tails(bounded(0.0), infinite(1, 0, 0.0, -2.0))

    def _sample(self, rng: np.random.Generator, shape: tuple[int, ...], *hyper: Array) -> Any:
        return hyper[0] * np.abs(rng.standard_cauchy(shape))

    def _log_tails(self, x: Array, *hyper: Array) -> tuple[Array, Array]:
        z = x / hyper[0]
        return np.log(np.arctan(z) * 2 / math.pi), np.log(np.arctan2(1, z) * 2 / math.pi)

    def _flows(self, x: Array, *hyper: Array) -> dict[str, Array]:
        return {"scale": x / hyper[0]}
