"""The Poisson distribution."""

from __future__ import annotations

import math
from dataclasses import dataclass
from typing import Any, ClassVar

import numpy as np

from steelyard.densities.counts import Counts
from steelyard.densities.hyperparameters import Array, Hyperparameter
from steelyard.densities.special import gamma_tails
from steelyard.densities.tails import Tails, bounded, infinite

__all__ = ["Poisson"]


@dataclass(frozen=True, repr=False)
class Poisson(Counts):
    """
    Poisson distribution of whole numbers from 0.

    Parameters
    ----------
    rate : float, array_like or str
        Mean, positive.

    Raises
    ------
    ArgumentError
        For a rate that is not positive.

    Notes
    -----
    ``log p(k) = k log rate − rate − log k!``; −inf where k is not a whole number.

    Examples
    --------
    >>> import steelyard as sy
    >>> sy.Poisson(2).log_density([0, 1.5]).tolist()
    [-2.0, -inf]
    """

    rate: Hyperparameter
    domains: ClassVar = {"rate": "positive"}
    family: ClassVar = "poisson"

    def _slopes(self, x: Array, *hyper: Array) -> dict[str, Array]:
        return {"rate": x / hyper[0] - 1}

    def _support(self, *hyper: Array) -> tuple[Any, Any]:
        return 0.0, math.inf

    def _tails(self, *hyper: Array) -> Tails:
        # −k log k: faster than every exponential, slower than any higher power of k.
        return Tails(bounded(0.0), infinite(1, 1, math.inf))

    def _sample(self, rng: np.random.Generator, shape: tuple[int, ...], *hyper: Array) -> Any:
        return rng.poisson(hyper[0], shape)

    def _log_tails(self, x: Array, *hyper: Array) -> tuple[Array, Array]:
        above, below, *_ = gamma_tails(np.floor(x) + 1, hyper[0])
        return below, above

    def _flows(self, x: Array, *hyper: Array) -> dict[str, Array]:
        # The derivative of P(X ≤ k) in the rate is −p(k).
        return {"rate": np.ones_like(x + hyper[0])}
