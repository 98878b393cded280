"""The Pareto distribution."""

from __future__ import annotations

import math
from dataclasses import dataclass
from typing import Any, ClassVar

import numpy as np

from steelyard.densities.cumulative import Elementwise
from steelyard.densities.hyperparameters import Array, Hyperparameter
from steelyard.densities.special import log_complement
from steelyard.densities.tails import Tails, bounded, infinite

__all__ = ["Pareto"]


@dataclass(frozen=True, repr=False)
class Pareto(Elementwise):
    """
    Pareto distribution on ``[minimum, ∞)``.

    Parameters
    ----------
    shape : float, array_like or str
        Shape, positive: moments of lower order exist.
    minimum : float, array_like or str
        Smallest value, positive.

    Raises
    ------
    ArgumentError
        For a hyperparameter outside its range.

    Notes
    -----
    ``log p(x) = log a + a log m − (a + 1) log x`` for x ≥ m, with shape a and minimum m.

    Examples
    --------
    >>> import steelyard as sy
    >>> float(sy.Pareto(2, 1).log_density(1.0).round(6))
    0.693147
    """

    shape: Hyperparameter
    minimum: Hyperparameter
    domains: ClassVar = {"shape": "positive", "minimum": "positive"}
    family: ClassVar = "pareto"

    def _gradient(self, x: Array, *hyper: Array) -> Array:
        shape, minimum = hyper
        return -(shape + 1) / (x + 0 * minimum)

    def _slopes(self, x: Array, *hyper: Array) -> dict[str, Array]:
        shape, minimum = hyper
        return {"shape": 1 / shape - _log_ratio(x, minimum), "minimum": shape / minimum + 0 * x}

    def _support(self, *hyper: Array) -> tuple[Any, Any]:
        return hyper[1], math.inf

    def _tails(self, *hyper: Array) -> Tails:
        shape, minimum = hyper
        return Tails(bounded(minimum), infinite(1, 0, 0.0, -(shape + 1)))

    def _sample(self, rng: np.random.Generator, shape: tuple[int, ...], *hyper: Array) -> Any:
        return hyper[1] * np.exp(rng.standard_exponential(shape) / hyper[0])

    def _log_tails(self, x: Array, *hyper: Array) -> tuple[Array, Array]:
        fall = -hyper[0] * _log_ratio(x, hyper[1])
        return log_complement(fall), fall

    def _flows(self, x: Array, *hyper: Array) -> dict[str, Array]:
        shape, minimum = hyper
        return {"shape": -x * _log_ratio(x, minimum) / shape, "minimum": x / minimum}


def _log_ratio(x: Array, minimum: Array) -> Array:
    """``log(x/minimum)``, exact also close to the minimum."""
    near = np.log1p((x - minimum) / minimum)
    return np.where(x < 2 * minimum, near, np.log(x) - np.log(minimum))
