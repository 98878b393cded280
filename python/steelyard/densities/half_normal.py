"""The half-normal distribution."""

from __future__ import annotations

import math
from dataclasses import dataclass
from typing import Any, ClassVar

import numpy as np

from steelyard.densities.cumulative import Elementwise
from steelyard.densities.hyperparameters import Array, Hyperparameter
from steelyard.densities.special import gamma_tails, log_normal_cdf
from steelyard.densities.tails import Tails, bounded, infinite

__all__ = ["HalfNormal"]


@dataclass(frozen=True, repr=False)
class HalfNormal(Elementwise):
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
    family: ClassVar = "half_normal"

    def _gradient(self, x: Array, *hyper: Array) -> Array:
        return -x / hyper[0] ** 2

    def _slopes(self, x: Array, *hyper: Array) -> dict[str, Array]:
        (scale,) = hyper
        return {"scale": ((x / scale) ** 2 - 1) / scale}

    def _support(self, *hyper: Array) -> tuple[Any, Any]:
        return 0.0, math.inf

    def _tails(self, *hyper: Array) -> Tails:
        return Tails(bounded(0.0), infinite(1, 2, 0.5 / hyper[0] ** 2))

    def _sample(self, rng: np.random.Generator, shape: tuple[int, ...], *hyper: Array) -> Any:
        return hyper[0] * np.abs(rng.standard_normal(shape))

    def _log_tails(self, x: Array, *hyper: Array) -> tuple[Array, Array]:
        z = x / hyper[0]
        # z² has the gamma distribution with shape ½ and rate ½.
        return gamma_tails(0.5, 0.5 * z**2)[0], math.log(2) + log_normal_cdf(-z)

    def _flows(self, x: Array, *hyper: Array) -> dict[str, Array]:
        return {"scale": x / hyper[0]}
