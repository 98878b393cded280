"""The exponential distribution."""

from __future__ import annotations

import math
from dataclasses import dataclass
from typing import Any, ClassVar

import numpy as np

from steelyard.densities.cumulative import Elementwise
from steelyard.densities.hyperparameters import Array, Hyperparameter
from steelyard.densities.special import log_complement
from steelyard.densities.tails import Tails, bounded, infinite

__all__ = ["Exponential"]


@dataclass(frozen=True, repr=False)
class Exponential(Elementwise):
    """
    Exponential distribution on ``[0, ∞)``.

    Parameters
    ----------
    rate : float, array_like or str
        Rate (one over the mean), positive.

    Raises
    ------
    ArgumentError
        For a hyperparameter outside its range.

    Notes
    -----
    ``log p(x) = log rate − rate x`` for x ≥ 0.

    Examples
    --------
    >>> import steelyard as sy
    >>> float(sy.Exponential(2).log_density(0.0).round(6))
    0.693147
    """

    rate: Hyperparameter
    domains: ClassVar = {"rate": "positive"}
    family: ClassVar = "exponential"

    def _gradient(self, x: Array, *hyper: Array) -> Array:
        return np.broadcast_to(-hyper[0], np.shape(x * hyper[0]))

    def _slopes(self, x: Array, *hyper: Array) -> dict[str, Array]:
        return {"rate": 1 / hyper[0] - x}

    def _support(self, *hyper: Array) -> tuple[Any, Any]:
        return 0.0, math.inf

    def _tails(self, *hyper: Array) -> Tails:
        return Tails(bounded(0.0), infinite(1, 1, hyper[0]))

    def _sample(self, rng: np.random.Generator, shape: tuple[int, ...], *hyper: Array) -> Any:
        return rng.standard_exponential(shape) / hyper[0]

    def _log_tails(self, x: Array, *hyper: Array) -> tuple[Array, Array]:
        fall = -hyper[0] * x
        return log_complement(fall), fall

    def _flows(self, x: Array, *hyper: Array) -> dict[str, Array]:
        return {"rate": -x / hyper[0]}
