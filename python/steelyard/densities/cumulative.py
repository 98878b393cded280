"""Distributions of single numbers, whose mass between two limits is known."""

from __future__ import annotations

from abc import abstractmethod
from collections.abc import Mapping
from dataclasses import dataclass
from typing import Any, ClassVar

import numpy as np

from steelyard.densities import kernel
from steelyard.densities.distribution import Array, Distribution
from steelyard.densities.special import log_complement

__all__ = ["Cumulative", "Elementwise", "log_tails_at"]

# Below this width on the log scale the difference of two distribution functions loses digits, and
# the density itself is summed: more than 1e-15/0.05 of the mass is never lost.
_NARROW = 0.05
# Gauss-Legendre nodes: exact to the last digit for a density that changes by 5 % of its own tail.
_NODES, _NODE_WEIGHTS = np.polynomial.legendre.leggauss(24)
# Most whole numbers between two limits that are summed one by one.
_MOST_COUNTS = 64


@dataclass(frozen=True, repr=False)
class Cumulative(Distribution):
    """A distribution of single numbers, which can be truncated."""

    @abstractmethod
    def _log_tails(self, x: Array, *hyper: Any) -> tuple[Array, Array]:
        """``log P(X ≤ x)`` and ``log P(X > x)`` inside the support, anything outside."""

    @abstractmethod
    def _flows(self, x: Array, *hyper: Any) -> dict[str, Array]:
        """
        Speed of a quantile that sits at `x`, in each hyperparameter.

        Minus the derivative of ``P(X ≤ x)`` over the density: 1 for a location, z for a scale.
        """

    def _log_mass(self, lower: Array, upper: Array, *hyper: Any) -> Array:
        """``log P(lower ≤ X ≤ upper)``, −inf for limits in the wrong order."""
        low, high = self._ends(lower, upper)
        (below_low, above_low), (below, above) = (log_tails_at(self, v, hyper) for v in (low, high))
        # Subtract in the tail where both numbers are small.
        in_lower = below < above_low
        larger = np.where(in_lower, below, above_low)
        width = larger - np.where(in_lower, below_low, above)
        mass = np.where(width > 0, larger + log_complement(-width), -np.inf)
        narrow = (width < _NARROW) & (low < high) & np.isfinite(low) & np.isfinite(high)
        return self._summed(mass, narrow, low, high, hyper) if np.any(narrow) else mass

    def _ends(self, lower: Array, upper: Array) -> tuple[Array, Array]:
        """Points whose distribution functions differ by the mass from `lower` to `upper`."""
        return (np.ceil(lower) - 1, np.floor(upper)) if self.is_discrete else (lower, upper)

    def _summed(self, mass: Array, narrow: Any, low: Array, high: Array, hyper: Any) -> Array:
        """`mass` with its narrow entries summed from the density."""
        lower, upper = self._support(*hyper)
        low = np.maximum(low, np.asarray(lower) - 1 if self.is_discrete else lower)
        arrays = np.broadcast_arrays(mass, narrow, low, np.minimum(high, upper), *hyper)
        which = arrays[1]
        low, high, *parts = (a[which][:, None] for a in arrays[2:])
        if self.is_discrete:
            steps = np.arange(1.0, _MOST_COUNTS + 1)
            terms = np.where(low + steps <= high, self._log_density(low + steps, *parts), -np.inf)
            summed = np.logaddexp.reduce(terms, axis=1)
            summed = np.where((high - low)[:, 0] > _MOST_COUNTS, arrays[0][which], summed)
        else:
            half = (high - low) / 2
            nodes = (low + high) / 2 + half * _NODES
            terms = self._log_density(nodes, *parts) + np.log(half * _NODE_WEIGHTS)
            summed = np.logaddexp.reduce(terms, axis=1)
        out = np.array(arrays[0])
        out[which] = summed
        return out


def log_tails_at(distribution: Cumulative, x: Array, hyper: tuple[Any, ...]) -> tuple[Array, Array]:
    """``log P(X ≤ x)`` and ``log P(X > x)`` anywhere."""
    lower, upper = distribution._support(*hyper)
    below = x < lower if distribution.is_discrete else x <= lower
    above = x >= upper
    log_below, log_above = distribution._log_tails(x, *hyper)
    return (
        np.where(below, -np.inf, np.where(above, 0.0, log_below)),
        np.where(below, 0.0, np.where(above, -np.inf, log_above)),
    )


@dataclass(frozen=True, repr=False)
class Elementwise(Cumulative):
    """A family whose log density a kernel computes entry by entry."""

    # Name of the family in the kernel.
    family: ClassVar[str]
    # Domain of each hyperparameter, in the constructor's order.
    domains: ClassVar[Mapping[str, str]]

    def _log_density(self, x: Array, *hyper: Any) -> Array:
        return kernel.log_density(self.family, x, hyper)
