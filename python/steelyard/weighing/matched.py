"""What algebra knows of the weights where a gamma or beta prior is widened."""

from __future__ import annotations

from collections.abc import Mapping
from dataclasses import dataclass
from typing import Any, TypeGuard

import numpy as np

from steelyard.base import Base
from steelyard.base.draws import Array
from steelyard.base.priors import PriorTerm
from steelyard.changes.merging import PriorTarget
from steelyard.densities import Distribution
from steelyard.densities.tails import Tail, Tails
from steelyard.verdicts import Finding, judge
from steelyard.weighing.weigh import base_weights

__all__ = ["Matched", "gamma_or_beta_widened", "may_match"]


def gamma_or_beta_widened(base: Base, priors: Mapping[str, PriorTarget]) -> list[Finding]:
    """The same for gamma and beta priors, by the algebra of `Matched`."""
    findings = []
    for label, prior in priors.items():
        density, matched = prior.density.density, Matched.of(base, prior.base)
        if matched is None or not may_match(density):
            continue
        tails = density.tails(prior.base.value(base.draws).shape[1:])
        shape = matched.tail_shape(tails, prior.factor)
        if np.any(shape > 0):
            findings.append(matched.finding(label, float(np.max(shape))))
    return findings


def may_match(density: Any) -> TypeGuard[Distribution]:
    """Whether the algebra of gamma and beta priors can say anything about this density."""
    if not isinstance(density, Distribution):
        return False
    return not (density.names or density.event_axes or density.is_discrete)


@dataclass(frozen=True, eq=False)
class Matched:
    """
    A gamma or beta prior, and the posterior that has the mean and variance of the draws.

    A gamma posterior (A, B) whose prior loses a in shape and b in rate has weights of tail shape
    ``max(a/A, b/B)``; a beta posterior (A, B) whose prior loses a and b the same. Exact where the
    prior is conjugate, and then derived in one line from the density of the weights.

    Attributes
    ----------
    tails : Tails
        Of the prior.
    posterior : str
        The name of the family.
    first, second : numpy.ndarray
        A and B.
    """

    tails: Tails
    posterior: str
    first: Array
    second: Array

    @classmethod
    def of(cls, base: Base, term: PriorTerm) -> Matched | None:
        """None where the prior is neither, or the draws have no mean and variance to match."""
        old = term.density
        if not may_match(old):
            return None
        value = term.value(base.draws)
        tails = old.tails(value.shape[1:])
        lower, upper = tails.lower, tails.upper
        is_gamma = bool(np.all(np.isfinite(upper.rate) & (upper.rate > 0)))
        is_beta = bool(np.all(np.isfinite(upper.limit) & (upper.order == 0)))
        if not np.all(np.isfinite(lower.limit) & (lower.order == 0)) or not (is_gamma or is_beta):
            return None
        weights = base_weights(base).linear
        mean = np.average(value, axis=0, weights=weights) - lower.limit
        with np.errstate(over="ignore"):
            variance = np.average((value - mean - lower.limit) ** 2, axis=0, weights=weights)
            square = mean**2
        if not np.all((variance > 0) & np.isfinite(variance) & (square > 0) & np.isfinite(square)):
            return None
        if is_gamma:
            return cls(tails, "gamma", square / variance, mean / variance)
        width = upper.limit - lower.limit
        mean, variance = mean / width, variance / width**2
        size = mean * (1 - mean) / variance - 1
        return cls(tails, "beta", size * mean, size * (1 - mean))

    def tail_shape(self, after: Tails, factor: Any) -> Array:
        """Tail shape of the weights where the prior becomes a density with these tails."""
        before = self.tails
        lost = _power_lost(before.lower, after.lower, factor)
        if self.posterior == "gamma":
            above = before.upper.rate - (factor * after.upper.rate if factor else 0.0)
        else:
            above = _power_lost(before.upper, after.upper, factor)
        return np.maximum(lost / self.first, above / self.second)

    def finding(self, label: str, figure: float) -> Finding:
        """What that says of the term `label`."""
        return judge("prior_widened", figure, term=label, posterior=self.posterior)


def _power_lost(before: Tail, after: Tail, factor: Any) -> Array:
    """How much less steeply the target rises from a limit than the base; −inf where it cuts."""
    lost = before.power - factor * after.power
    return np.where((before.limit == after.limit) & (after.order == 0), lost, -np.inf)
