"""The Cauchy distribution."""

from __future__ import annotations

import math
from dataclasses import dataclass
from typing import Any, ClassVar

import numpy as np

from steelyard.densities.hyperparameters import Array, Hyperparameter
from steelyard.densities.location_scale import LocationScale
from steelyard.densities.tails import Tails, infinite

__all__ = ["Cauchy", "cauchy_rise"]


@dataclass(frozen=True, repr=False)
class Cauchy(LocationScale):
    """
    Cauchy distribution.

    Parameters
    ----------
    location : float, array_like or str
        Location (the median).
    scale : float, array_like or str
        Scale, positive: half of the mass lies within it of the location.

    Raises
    ------
    ArgumentError
        For a hyperparameter outside its range.

    Notes
    -----
    ``log p(x) = −log π − log scale − log(1 + z²)``, ``z = (x − location)/scale``.

    Examples
    --------
    >>> import steelyard as sy
    >>> float(sy.Cauchy(0, 1).log_density(1.0).round(6))
    -1.837877
    """

    location: Hyperparameter
    scale: Hyperparameter
    domains: ClassVar = {"location": "real", "scale": "positive"}
    family: ClassVar = "cauchy"

    @staticmethod
    def _rise(z: Array) -> Array:
        return cauchy_rise(z)

    def _tails(self, *hyper: Array) -> Tails:
        return Tails(infinite(-1, 0, 0.0, -2.0), infinite(1, 0, 0.0, -2.0))

    def _sample(self, rng: np.random.Generator, shape: tuple[int, ...], *hyper: Array) -> Any:
        return hyper[0] + hyper[1] * rng.standard_cauchy(shape)

    def _log_tails(self, x: Array, *hyper: Array) -> tuple[Array, Array]:
        z = (x - hyper[0]) / hyper[1]
        # The angle is small, not a difference, on the side of the small tail.
        return np.log(np.arctan2(1, -z) / math.pi), np.log(np.arctan2(1, z) / math.pi)


def cauchy_rise(z: Array) -> Array:
    """Derivative of the standard log density; divided so that no square overflows."""
    return np.where(z == 0, 0.0, -2 / (z + 1 / z))
