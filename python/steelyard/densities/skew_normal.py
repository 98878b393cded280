"""The skew-normal distribution."""

from __future__ import annotations

import math
from dataclasses import dataclass
from typing import Any, ClassVar

import numpy as np

from steelyard.densities.cumulative import Elementwise
from steelyard.densities.hyperparameters import Array, Hyperparameter
from steelyard.densities.special import log_normal_cdf, skew_normal_tails
from steelyard.densities.tails import Tails, infinite

__all__ = ["SkewNormal"]


@dataclass(frozen=True, repr=False)
class SkewNormal(Elementwise):
    """
    Skew-normal distribution (Azzalini 1985).

    Parameters
    ----------
    location : float, array_like or str
        Location; the mean only without slant.
    scale : float, array_like or str
        Scale, positive; the standard deviation only without slant.
    slant : float, array_like or str
        Slant, any number: positive leans the long tail upwards, 0 is the normal.

    Raises
    ------
    ArgumentError
        For a hyperparameter outside its range.

    Notes
    -----
    ``log p(x) = log 2 − log scale + log φ(z) + log Φ(slant z)``, ``z = (x − location)/scale``.

    References
    ----------
    Azzalini, A. (1985). A class of distributions which includes the normal ones. Scandinavian
    Journal of Statistics 12, 171-178.

    Examples
    --------
    >>> import steelyard as sy
    >>> float(sy.SkewNormal(0, 1, 3).log_density(0.0).round(6))
    -0.918939
    """

    location: Hyperparameter
    scale: Hyperparameter
    slant: Hyperparameter
    domains: ClassVar = {"location": "real", "scale": "positive", "slant": "real"}
    family: ClassVar = "skew_normal"

    def _gradient(self, x: Array, *hyper: Array) -> Array:
        location, scale, slant = hyper
        return self._rise((x - location) / scale, slant) / scale

    @staticmethod
    def _rise(z: Array, slant: Array) -> Array:
        """Derivative of the standard log density."""
        return slant * _inverse_mills(slant * z) - z

    def _slopes(self, x: Array, *hyper: Array) -> dict[str, Array]:
        location, scale, slant = hyper
        z = (x - location) / scale
        rise = self._rise(z, slant)
        return {
            "location": -rise / scale,
            "scale": -(1 + z * rise) / scale,
            "slant": z * _inverse_mills(slant * z),
        }

    def _support(self, *hyper: Array) -> tuple[Any, Any]:
        return -math.inf, math.inf

    def _tails(self, *hyper: Array) -> Tails:
        _, scale, slant = hyper
        # On the side that the slant leans away from, Φ(slant z) falls like a normal tail too.
        light, heavy = 0.5 * (1 + slant**2) / scale**2, 0.5 / scale**2
        lower, upper = slant > 0, slant < 0
        return Tails(
            infinite(-1, 2, np.where(lower, light, heavy), np.where(lower, -1.0, 0.0)),
            infinite(1, 2, np.where(upper, light, heavy), np.where(upper, -1.0, 0.0)),
        )

    def _sample(self, rng: np.random.Generator, shape: tuple[int, ...], *hyper: Array) -> Any:
        location, scale, slant = hyper
        weight = slant / np.sqrt(1 + slant**2)
        first, second = rng.standard_normal((2, *shape))
        leaning = weight * np.abs(first) + np.sqrt((1 - weight) * (1 + weight)) * second
        return location + scale * leaning

    def _log_tails(self, x: Array, *hyper: Array) -> tuple[Array, Array]:
        location, scale, slant = hyper
        return skew_normal_tails((x - location) / scale, slant)

    def _flows(self, x: Array, *hyper: Array) -> dict[str, Array]:
        location, scale, slant = hyper
        z, square = (x - location) / scale, 1 + slant**2
        log_p = self._log_density(x, *hyper)
        by_slant = np.exp(-0.5 * z**2 * square - log_p) / (math.pi * square)
        return {"location": np.ones_like(z + slant), "scale": z, "slant": by_slant}


def _inverse_mills(x: Array) -> Array:
    """``φ(x)/Φ(x)``; far below 0 by its asymptotic series, since there the logarithms cancel."""
    near = np.exp(-0.5 * x**2 - 0.5 * math.log(2 * math.pi) - log_normal_cdf(x))
    rest = np.zeros_like(near)
    for k in range(10, 0, -1):
        rest = -(2 * k - 1) / x**2 * (1 + rest)
    return np.where(x < -20, -x / (1 + rest), near)
