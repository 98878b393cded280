"""The binomial distribution."""

from __future__ import annotations

from dataclasses import dataclass
from typing import Any, ClassVar

import numpy as np

from steelyard.densities.counts import Counts
from steelyard.densities.hyperparameters import Array, Hyperparameter
from steelyard.densities.special import beta_tails, digamma, tail_flows
from steelyard.densities.tails import Tails, bounded

__all__ = ["Binomial"]


@dataclass(frozen=True, repr=False)
class Binomial(Counts):
    """
    Binomial distribution: successes in n trials.

    Parameters
    ----------
    n : float, array_like or str
        Number of trials, whole, 0 or above.
    p : float, array_like or str
        Probability of success, from 0 to 1.

    Raises
    ------
    ArgumentError
        For a hyperparameter outside its range.

    Notes
    -----
    ``log p(k) = log C(n, k) + k log p + (n − k) log(1 − p)``; −inf where k is not a whole number.
    The derivative in n is that of the continuation of ``C(n, k)`` by gamma functions.

    Examples
    --------
    >>> import steelyard as sy
    >>> float(sy.Binomial(4, 0.5).log_density(2).round(6))
    -0.980829
    """

    n: Hyperparameter
    p: Hyperparameter
    domains: ClassVar = {"n": "count", "p": "share"}
    family: ClassVar = "binomial"

    def _slopes(self, x: Array, *hyper: Array) -> dict[str, Array]:
        n, p = hyper
        failures = n - x
        # 0/0 where a certain outcome has a certain probability.
        success = np.where(x == 0, 0.0, x / p)
        failure = np.where(failures == 0, 0.0, failures / (1 - p))
        by_n = digamma(n + 1) - digamma(np.maximum(failures, 0.0) + 1) + np.log1p(-p)
        return {"n": by_n, "p": success - failure}

    def _support(self, *hyper: Array) -> tuple[Any, Any]:
        return 0.0, hyper[0]

    def _tails(self, *hyper: Array) -> Tails:
        return Tails(bounded(0.0), bounded(hyper[0]))

    def _sample(self, rng: np.random.Generator, shape: tuple[int, ...], *hyper: Array) -> Any:
        return rng.binomial(hyper[0].astype(np.int64), hyper[1], shape)

    def _log_tails(self, x: Array, *hyper: Array) -> tuple[Array, Array]:
        below, above, *_ = self._beta(x, *hyper)
        return below, above

    def _flows(self, x: Array, *hyper: Array) -> dict[str, Array]:
        n, p = hyper
        by_n, _ = tail_flows(self._beta(x, *hyper), self._log_density(x, *hyper))
        return {"n": by_n, "p": (n - x) / (1 - p)}

    @staticmethod
    def _beta(x: Array, n: Array, p: Array) -> Array:
        """``P(X ≤ k) = I_(1−p)(n − k, k + 1)``, its logarithms and slopes."""
        k = np.floor(x)
        return beta_tails(np.where(k < n, n - k, np.nan), k + 1, 1 - p, p)
