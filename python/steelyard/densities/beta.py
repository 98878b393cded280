"""The beta distribution."""

from __future__ import annotations

from dataclasses import dataclass
from typing import Any, ClassVar

import numpy as np

from steelyard.densities.cumulative import Elementwise
from steelyard.densities.hyperparameters import Array, Hyperparameter
from steelyard.densities.special import beta_tails, digamma, tail_flows
from steelyard.densities.tails import Tails, bounded

__all__ = ["Beta"]


@dataclass(frozen=True, repr=False)
class Beta(Elementwise):
    """
    Beta distribution on ``[0, 1]``.

    Parameters
    ----------
    a : float, array_like or str
        First shape, positive: the density rises like ``x^(a − 1)`` from 0.
    b : float, array_like or str
        Second shape, positive: the density falls like ``(1 − x)^(b − 1)`` to 1.

    Raises
    ------
    ArgumentError
        For a hyperparameter outside its range.

    Notes
    -----
    ``log p(x) = (a − 1) log x + (b − 1) log(1 − x) − log B(a, b)``.

    Examples
    --------
    >>> import steelyard as sy
    >>> float(sy.Beta(2, 2).log_density(0.5).round(6))
    0.405465
    """

    a: Hyperparameter
    b: Hyperparameter
    domains: ClassVar = {"a": "positive", "b": "positive"}
    family: ClassVar = "beta"

    def _gradient(self, x: Array, *hyper: Array) -> Array:
        a, b = hyper
        return np.where(a == 1, 0.0, (a - 1) / x) - np.where(b == 1, 0.0, (b - 1) / (1 - x))

    def _slopes(self, x: Array, *hyper: Array) -> dict[str, Array]:
        a, b = hyper
        both = digamma(a + b)
        return {"a": np.log(x) - digamma(a) + both, "b": np.log1p(-x) - digamma(b) + both}

    def _support(self, *hyper: Array) -> tuple[Any, Any]:
        return 0.0, 1.0

    def _tails(self, *hyper: Array) -> Tails:
        a, b = hyper
        return Tails(bounded(0.0, a - 1), bounded(1.0, b - 1))

    def _sample(self, rng: np.random.Generator, shape: tuple[int, ...], *hyper: Array) -> Any:
        return rng.beta(hyper[0], hyper[1], shape)

    def _log_tails(self, x: Array, *hyper: Array) -> tuple[Array, Array]:
        below, above, *_ = beta_tails(hyper[0], hyper[1], x, 1 - x)
        return below, above

    def _flows(self, x: Array, *hyper: Array) -> dict[str, Array]:
        tails = beta_tails(hyper[0], hyper[1], x, 1 - x)
        by_a, by_b = tail_flows(tails, self._log_density(x, *hyper))
        return {"a": by_a, "b": by_b}
