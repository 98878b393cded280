"""The logistic distribution."""

from __future__ import annotations

from dataclasses import dataclass
from typing import Any, ClassVar

import numpy as np

from steelyard.densities.hyperparameters import Array, Hyperparameter
from steelyard.densities.location_scale import LocationScale
from steelyard.densities.tails import Tails, infinite

__all__ = ["Logistic"]


@dataclass(frozen=True, repr=False)
class Logistic(LocationScale):
    """
    Logistic distribution.

    Parameters
    ----------
    location : float, array_like or str
        Location (the mean).
    scale : float, array_like or str
        Scale, positive; the standard deviation is π/√3 times that.

    Raises
    ------
    ArgumentError
        For a hyperparameter outside its range.

    Notes
    -----
    ``log p(x) = −z − 2 log(1 + e^(−z)) − log scale``, ``z = (x − location)/scale``.

    Examples
    --------
    >>> import steelyard as sy
    >>> float(sy.Logistic(0, 1).log_density(0.0).round(6))
    -1.386294
    """

    location: Hyperparameter
    scale: Hyperparameter
    domains: ClassVar = {"location": "real", "scale": "positive"}
    family: ClassVar = "logistic"

    @staticmethod
    def _rise(z: Array) -> Array:
        return -np.tanh(z / 2)

    def _tails(self, *hyper: Array) -> Tails:
        speed = 1 / hyper[1]
        return Tails(infinite(-1, 1, speed), infinite(1, 1, speed))

    def _sample(self, rng: np.random.Generator, shape: tuple[int, ...], *hyper: Array) -> Any:
        return rng.logistic(hyper[0], hyper[1], shape)

    def _log_tails(self, x: Array, *hyper: Array) -> tuple[Array, Array]:
        z = (x - hyper[0]) / hyper[1]
        return -np.logaddexp(0.0, -z), -np.logaddexp(0.0, z)
