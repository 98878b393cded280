"""The normal distribution."""

from __future__ import annotations

import math
from dataclasses import dataclass
from typing import Any, ClassVar

import numpy as np

from steelyard.densities.cumulative import Elementwise
from steelyard.densities.hyperparameters import Array, Hyperparameter
from steelyard.densities.special import log_normal_cdf
from steelyard.densities.tails import Tails, infinite

__all__ = ["Normal"]


@dataclass(frozen=True, repr=False)
class Normal(Elementwise):
    """
    Normal distribution.

    Parameters
    ----------
    mean : float, array_like or str
        Mean, on the scale of the parameter.
    sd : float, array_like or str
        Standard deviation, positive.

    Raises
    ------
    ArgumentError
        For a hyperparameter outside its range.

    Notes
    -----
    ``log p(x) = −½((x − mean)/sd)² − log sd − ½ log 2π``.

    Examples
    --------
    >>> import steelyard as sy
    >>> float(sy.Normal(0, 1).log_density(0.0).round(6))
    -0.918939
    """

    mean: Hyperparameter
    sd: Hyperparameter
    domains: ClassVar = {"mean": "real", "sd": "positive"}
    family: ClassVar = "normal"

    def _gradient(self, x: Array, *hyper: Array) -> Array:
        mean, sd = hyper
        return -(x - mean) / sd**2

    def _slopes(self, x: Array, *hyper: Array) -> dict[str, Array]:
        mean, sd = hyper
        z = (x - mean) / sd
        return {"mean": z / sd, "sd": (z**2 - 1) / sd}

    def _support(self, *hyper: Array) -> tuple[Any, Any]:
        return -math.inf, math.inf

    def _tails(self, *hyper: Array) -> Tails:
        speed = 0.5 / hyper[1] ** 2
        return Tails(infinite(-1, 2, speed), infinite(1, 2, speed))

    def _sample(self, rng: np.random.Generator, shape: tuple[int, ...], *hyper: Array) -> Any:
        return hyper[0] + hyper[1] * rng.standard_normal(shape)

    def _log_tails(self, x: Array, *hyper: Array) -> tuple[Array, Array]:
        z = (x - hyper[0]) / hyper[1]
        return log_normal_cdf(z), log_normal_cdf(-z)

    def _flows(self, x: Array, *hyper: Array) -> dict[str, Array]:
        z = (x - hyper[0]) / hyper[1]
        return {"mean": np.ones_like(z), "sd": z}
