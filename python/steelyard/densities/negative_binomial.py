"""The negative binomial distribution."""

from __future__ import annotations

import math
from dataclasses import dataclass
from typing import Any, ClassVar

import numpy as np

from steelyard.densities.counts import Counts
from steelyard.densities.hyperparameters import Array, Hyperparameter
from steelyard.densities.special import beta_tails, digamma, tail_flows
from steelyard.densities.tails import Tails, bounded, infinite

__all__ = ["NegativeBinomial"]


@dataclass(frozen=True, repr=False)
class NegativeBinomial(Counts):
    """
    Negative binomial distribution: a Poisson distribution whose rate is gamma distributed.

    Parameters
    ----------
    mean : float, array_like or str
        Mean m, positive.
    dispersion : float, array_like or str
        Dispersion d, positive: the variance is ``m + m²/d``, and large d is close to Poisson.

    Raises
    ------
    ArgumentError
        For a hyperparameter outside its range.

    Notes
    -----
    ``log p(k) = log Γ(k + d) − log k! − log Γ(d) + d log(d/(d + m)) + k log(m/(d + m))``; −inf
    where k is not a whole number.

    Examples
    --------
    >>> import steelyard as sy
    >>> float(sy.NegativeBinomial(1, 1).log_density(0).round(6))
    -0.693147
    """

    mean: Hyperparameter
    dispersion: Hyperparameter
    domains: ClassVar = {"mean": "positive", "dispersion": "positive"}
    family: ClassVar = "negative_binomial"

    def _slopes(self, x: Array, *hyper: Array) -> dict[str, Array]:
        mean, d = hyper
        whole = mean + d
        counts = digamma(np.maximum(x, 0.0) + d) - digamma(d) - np.log1p(mean / d)
        return {
            "mean": d / whole * (x - mean) / mean,
            "dispersion": counts + (mean - x) / whole,
        }

    def _support(self, *hyper: Array) -> tuple[Any, Any]:
        return 0.0, math.inf

    def _tails(self, *hyper: Array) -> Tails:
        mean, d = hyper
        return Tails(bounded(0.0), infinite(1, 1, np.log1p(d / mean), d - 1))

    def _sample(self, rng: np.random.Generator, shape: tuple[int, ...], *hyper: Array) -> Any:
        mean, d = hyper
        return rng.poisson(rng.standard_gamma(d, shape) * (mean / d))

    def _log_tails(self, x: Array, *hyper: Array) -> tuple[Array, Array]:
        below, above, *_ = self._beta(x, *hyper)
        return below, above

    def _flows(self, x: Array, *hyper: Array) -> dict[str, Array]:
        mean, d = hyper
        moved = (x + d) / (d + mean)
        by_shape, _ = tail_flows(self._beta(x, *hyper), self._log_density(x, *hyper))
        return {"mean": moved, "dispersion": by_shape - moved * mean / d}

    @staticmethod
    def _beta(x: Array, mean: Array, d: Array) -> Array:
        """``P(X ≤ k) = I_x(d, k + 1)``, ``x = d/(d + m)``, its logarithms and slopes."""
        ratio = mean / d
        return beta_tails(d, np.floor(x) + 1, 1 / (1 + ratio), 1 / (1 + 1 / ratio))
