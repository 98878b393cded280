"""The Laplace distribution."""

from __future__ import annotations

import math
from dataclasses import dataclass
from typing import Any, ClassVar

import numpy as np

from steelyard.densities.hyperparameters import Array, Hyperparameter
from steelyard.densities.location_scale import LocationScale
from steelyard.densities.special import log_complement
from steelyard.densities.tails import Tails, infinite

__all__ = ["Laplace"]


@dataclass(frozen=True, repr=False)
class Laplace(LocationScale):
    """
    Laplace (double exponential) distribution.

    Parameters
    ----------
    location : float, array_like or str
        Location (the median).
    scale : float, array_like or str
        Scale, positive: the mean distance from the location.

    Raises
    ------
    ArgumentError
        For a hyperparameter outside its range.

    Notes
    -----
    ``log p(x) = −|x − location|/scale − log 2 scale``. At the location itself the gradient is 0,
    the middle of its two one-sided values.

    Examples
    --------
    >>> import steelyard as sy
    >>> float(sy.Laplace(0, 1).log_density(0.0).round(6))
    -0.693147
    """

    location: Hyperparameter
    scale: Hyperparameter
    domains: ClassVar = {"location": "real", "scale": "positive"}
    family: ClassVar = "laplace"

    @staticmethod
    def _rise(z: Array) -> Array:
        return -np.sign(z)

    def _tails(self, *hyper: Array) -> Tails:
        speed = 1 / hyper[1]
        return Tails(infinite(-1, 1, speed), infinite(1, 1, speed))

    def _sample(self, rng: np.random.Generator, shape: tuple[int, ...], *hyper: Array) -> Any:
        return rng.laplace(hyper[0], hyper[1], shape)

    def _log_tails(self, x: Array, *hyper: Array) -> tuple[Array, Array]:
        z = (x - hyper[0]) / hyper[1]
        outer, inner = -np.abs(z) - math.log(2), np.log1p(-0.5 * np.exp(-np.abs(z)))
        return np.where(z > 0, inner, outer), np.where(z > 0, outer, inner)

    def _log_mass(self, lower: Array, upper: Array, *hyper: Array) -> Array:
        # The density has a kink at its location, so each side is taken by itself: half of
        # e^(−a) (1 − e^(a − b)) between the distances a and b.
        low, high = (lower - hyper[0]) / hyper[1], (upper - hyper[0]) / hyper[1]
        sides = [
            (np.maximum(low, 0.0), np.maximum(high, 0.0)),
            (np.maximum(-high, 0.0), np.maximum(-low, 0.0)),
        ]
        left, right = (np.where(a < b, log_complement(a - b) - a, -np.inf) for a, b in sides)
        return np.asarray(np.logaddexp(left, right) - math.log(2))
