"""The gamma distribution."""

from __future__ import annotations

import math
from dataclasses import dataclass
from typing import Any, ClassVar

import numpy as np

from steelyard.densities.cumulative import Elementwise
from steelyard.densities.hyperparameters import Array, Hyperparameter
from steelyard.densities.special import digamma, gamma_tails, tail_flows
from steelyard.densities.tails import Tails, bounded, infinite

__all__ = ["Gamma"]


@dataclass(frozen=True, repr=False)
class Gamma(Elementwise):
    """
    Gamma distribution on ``[0, ∞)``.

    Parameters
    ----------
    shape : float, array_like or str
        Shape, positive.
    rate : float, array_like or str
        Rate (one over the scale), positive.

    Raises
    ------
    ArgumentError
        For a hyperparameter outside its range.

    Notes
    -----
    ``log p(x) = a log b − log Γ(a) + (a − 1) log x − b x`` with shape a and rate b.

    Examples
    --------
    >>> import steelyard as sy
    >>> float(sy.Gamma(1, 2).log_density(0.0).round(6))
    0.693147
    """

    shape: Hyperparameter
    rate: Hyperparameter
    domains: ClassVar = {"shape": "positive", "rate": "positive"}
    family: ClassVar = "gamma"

    def _gradient(self, x: Array, *hyper: Array) -> Array:
        shape, rate = hyper
        return np.where(shape == 1, 0.0, (shape - 1) / x) - rate

    def _slopes(self, x: Array, *hyper: Array) -> dict[str, Array]:
        shape, rate = hyper
        return {"shape": np.log(rate * x) - digamma(shape), "rate": shape / rate - x}

    def _support(self, *hyper: Array) -> tuple[Any, Any]:
        return 0.0, math.inf

    def _tails(self, *hyper: Array) -> Tails:
        shape, rate = hyper
        return Tails(bounded(0.0, shape - 1), infinite(1, 1, rate, shape - 1))

    def _sample(self, rng: np.random.Generator, shape: tuple[int, ...], *hyper: Array) -> Any:
        return rng.standard_gamma(hyper[0], shape) / hyper[1]

    def _log_tails(self, x: Array, *hyper: Array) -> tuple[Array, Array]:
        below, above, *_ = gamma_tails(hyper[0], hyper[1] * x)
        return below, above

    def _flows(self, x: Array, *hyper: Array) -> dict[str, Array]:
        shape, rate = hyper
        log_p = self._log_density(x, *hyper)
        (by_shape,) = tail_flows(gamma_tails(shape, rate * x), log_p)
        return {"shape": by_shape, "rate": -x / rate}
