"""The Gumbel distribution."""

from __future__ import annotations

import math
from dataclasses import dataclass
from typing import Any, ClassVar

import numpy as np

from steelyard.densities.hyperparameters import Array, Hyperparameter
from steelyard.densities.location_scale import LocationScale
from steelyard.densities.special import log_complement
from steelyard.densities.tails import Tails, infinite

__all__ = ["Gumbel"]


@dataclass(frozen=True, repr=False)
class Gumbel(LocationScale):
    """
    Gumbel distribution of largest values.

    Parameters
    ----------
    location : float, array_like or str
        Location (the mode).
    scale : float, array_like or str
        Scale, positive.

    Raises
    ------
    ArgumentError
        For a hyperparameter outside its range.

    Notes
    -----
    ``log p(x) = −z − e^(−z) − log scale``, ``z = (x − location)/scale``.

    Examples
    --------
    >>> import steelyard as sy
    >>> float(sy.Gumbel(0, 1).log_density(0.0).round(6))
    -1.0
    """

    location: Hyperparameter
    scale: Hyperparameter
    domains: ClassVar = {"location": "real", "scale": "positive"}
    family: ClassVar = "gumbel"

    @staticmethod
    def _rise(z: Array) -> Array:
        return np.expm1(-z)

    def _tails(self, *hyper: Array) -> Tails:
        # Downwards exp(−e^(−z)) beats every exponential power.
        return Tails(infinite(-1, math.inf, math.inf), infinite(1, 1, 1 / hyper[1]))

    def _sample(self, rng: np.random.Generator, shape: tuple[int, ...], *hyper: Array) -> Any:
        return rng.gumbel(hyper[0], hyper[1], shape)

    def _log_tails(self, x: Array, *hyper: Array) -> tuple[Array, Array]:
        z = (x - hyper[0]) / hyper[1]
        fall = np.exp(-z)
        # Far out 1 − exp(−fall) is the fall itself, long after that has underflowed.
        return -fall, np.where(z > 40, -z, log_complement(-fall))
