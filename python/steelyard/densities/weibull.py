"""The Weibull distribution."""

from __future__ import annotations

import math
from dataclasses import dataclass
from typing import Any, ClassVar

import numpy as np

from steelyard.densities.cumulative import Elementwise
from steelyard.densities.hyperparameters import Array, Hyperparameter
from steelyard.densities.special import log_complement
from steelyard.densities.tails import Tails, bounded, infinite

__all__ = ["Weibull"]


@dataclass(frozen=True, repr=False)
class Weibull(Elementwise):
    """
    Weibull distribution on ``[0, ∞)``.

    Parameters
    ----------
    shape : float, array_like or str
        Shape, positive: 1 is exponential, larger falls faster.
    scale : float, array_like or str
        Scale, positive: 63 % of the mass lies below it.

    Raises
    ------
    ArgumentError
        For a hyperparameter outside its range.

    Notes
    -----
    ``log p(x) = log(k/s) + (k − 1) log(x/s) − (x/s)^k`` with shape k and scale s.

    Examples
    --------
    >>> import steelyard as sy
    >>> float(sy.Weibull(2, 1).log_density(1.0).round(6))
    -0.306853
    """

    shape: Hyperparameter
    scale: Hyperparameter
    domains: ClassVar = {"shape": "positive", "scale": "positive"}
    family: ClassVar = "weibull"

    def _gradient(self, x: Array, *hyper: Array) -> Array:
        shape, scale = hyper
        fall = (x / scale) ** shape
        return np.where(shape == 1, -1 / scale, (shape - 1 - shape * fall) / x)

    def _slopes(self, x: Array, *hyper: Array) -> dict[str, Array]:
        shape, scale = hyper
        log, fall = np.log(x / scale), (x / scale) ** shape
        # At 0 the logarithm is infinite and the power beside it 0.
        rest = np.where(fall == 0, log, (1 - fall) * log)
        return {"shape": 1 / shape + rest, "scale": shape / scale * (fall - 1)}

    def _support(self, *hyper: Array) -> tuple[Any, Any]:
        return 0.0, math.inf

    def _tails(self, *hyper: Array) -> Tails:
        shape, scale = hyper
        return Tails(bounded(0.0, shape - 1), infinite(1, shape, scale**-shape, shape - 1))

    def _sample(self, rng: np.random.Generator, shape: tuple[int, ...], *hyper: Array) -> Any:
        return hyper[1] * rng.weibull(hyper[0], shape)

    def _log_tails(self, x: Array, *hyper: Array) -> tuple[Array, Array]:
        fall = -((x / hyper[1]) ** hyper[0])
        return log_complement(fall), fall

    def _flows(self, x: Array, *hyper: Array) -> dict[str, Array]:
        shape, scale = hyper
        return {"shape": -x * np.log(x / scale) / shape, "scale": x / scale}
