"""The log-normal distribution."""

from __future__ import annotations

import math
from dataclasses import dataclass
from typing import Any, ClassVar

import numpy as np

from steelyard.densities.cumulative import Elementwise
from steelyard.densities.hyperparameters import Array, Hyperparameter
from steelyard.densities.special import log_normal_cdf
from steelyard.densities.tails import Tails, bounded, infinite

__all__ = ["LogNormal"]


@dataclass(frozen=True, repr=False)
class LogNormal(Elementwise):
    """
    Log-normal distribution on ``(0, ∞)``: the logarithm is normal.

    Parameters
    ----------
    log_mean : float, array_like or str
        Mean of the logarithm.
    log_sd : float, array_like or str
        Standard deviation of the logarithm, positive.

    Raises
    ------
    ArgumentError
        For a hyperparameter outside its range.

    Notes
    -----
    ``log p(x) = −½((log x − m)/s)² − log x − log s − ½ log 2π``, m = log_mean, s = log_sd.

    Examples
    --------
    >>> import steelyard as sy
    >>> float(sy.LogNormal(0, 1).log_density(1.0).round(6))
    -0.918939
    """

    log_mean: Hyperparameter
    log_sd: Hyperparameter
    domains: ClassVar = {"log_mean": "real", "log_sd": "positive"}
    family: ClassVar = "log_normal"

    def _gradient(self, x: Array, *hyper: Array) -> Array:
        mean, sd = hyper
        return -((np.log(x) - mean) / sd**2 + 1) / x

    def _slopes(self, x: Array, *hyper: Array) -> dict[str, Array]:
        mean, sd = hyper
        z = (np.log(x) - mean) / sd
        return {"log_mean": z / sd, "log_sd": (z**2 - 1) / sd}

    def _support(self, *hyper: Array) -> tuple[Any, Any]:
        return 0.0, math.inf

    def _tails(self, *hyper: Array) -> Tails:
        # exp(−½ (log x)²/s²) beats every power of x, and no stretched exponential.
        return Tails(bounded(0.0, math.inf), infinite(1, 0, 0.0, -math.inf))

    def _sample(self, rng: np.random.Generator, shape: tuple[int, ...], *hyper: Array) -> Any:
        return np.exp(hyper[0] + hyper[1] * rng.standard_normal(shape))

    def _log_tails(self, x: Array, *hyper: Array) -> tuple[Array, Array]:
        z = (np.log(x) - hyper[0]) / hyper[1]
        return log_normal_cdf(z), log_normal_cdf(-z)

    def _flows(self, x: Array, *hyper: Array) -> dict[str, Array]:
        mean, sd = hyper
        return {
            "log_mean": np.broadcast_to(x, np.shape(x - mean)),
            "log_sd": x * (np.log(x) - mean) / sd,
        }
