"""What algebra knows of a target before any weight is computed."""

from __future__ import annotations

from collections.abc import Mapping
from typing import Any

import numpy as np

from steelyard.base import Base
from steelyard.base.draws import Array
from steelyard.changes.merging import PriorTarget
from steelyard.changes.target import Target
from steelyard.densities import Beta, Distribution, Gamma, Normal
from steelyard.verdicts import Finding, judge
from steelyard.weighing.supports import support_findings

__all__ = ["preflight"]

# Above this many parameters the covariance of the draws is too costly to be worth it.
_MOST_PARAMETERS = 500


def preflight(base: Base, target: Target) -> list[Finding]:
    """Findings about supports, widened normal priors and weakened likelihoods."""
    findings = list(support_findings(base, target))
    findings += _normal_widened(base, target.prior)
    findings += _gamma_or_beta_widened(base, target.prior)
    findings += _likelihood_loosened(base, target)
    return findings


def _tail_precision(density: Any, shape: tuple[int, ...]) -> Array | None:
    """Precision of a density's normal tail: 0 for heavier tails, None where not known."""
    if isinstance(density, Normal):
        if isinstance(density.sd, str):
            return None
        return np.broadcast_to(1 / np.asarray(density.sd, dtype=np.float64) ** 2, shape)
    name = type(density).__name__
    if isinstance(density, Distribution) and name in ("Flat", "StudentT"):
        return np.zeros(shape)
    return None


def _normal_widened(base: Base, priors: Mapping[str, PriorTarget]) -> list[Finding]:
    """
    Tail shape of the weights by algebra where normal priors are widened.

    For a normal posterior with covariance V and prior precisions that fall by A (diagonal), the
    weights grow like ``exp(½ x'A x)`` and their tail shape is the largest eigenvalue of
    ``V^½ A V^½``; their variance is finite below ½, their mean below 1.
    """
    values, loosened, labels = [], [], []
    for label, prior in priors.items():
        old = prior.base.density
        if not isinstance(old, Normal):
            continue
        value = prior.base.value(base.draws)
        shape = value.shape[1:]
        before = _tail_precision(old, shape)
        after = _tail_precision(prior.density.density, shape)
        if before is None or after is None:
            continue
        values.append(value.reshape(base.draws.size, -1))
        loosened.append((before - prior.factor * after).reshape(-1))
        labels.append(label)
    if not values or not np.any(np.concatenate(loosened) > 0):
        return []
    stacked = np.concatenate(values, axis=1)
    if stacked.shape[1] > min(_MOST_PARAMETERS, base.draws.size // 10):
        return []
    covariance = np.atleast_2d(np.cov(stacked, rowvar=False, aweights=_base_weights(base)))
    root = np.linalg.cholesky(covariance + 1e-12 * np.trace(covariance) * np.eye(len(covariance)))
    shape_by_algebra = np.linalg.eigvalsh(root.T @ (np.concatenate(loosened)[:, None] * root))[-1]
    return [
        judge("prior_widened", float(shape_by_algebra), term=", ".join(labels), posterior="normal")
    ]


def _gamma_or_beta_widened(base: Base, priors: Mapping[str, PriorTarget]) -> list[Finding]:
    """
    The same for gamma and beta priors, whose posterior is matched by its mean and variance.

    A gamma posterior (A, B) whose prior loses a in shape and b in rate has weights of tail shape
    ``max(a/A, b/B)``; a beta posterior (A, B) whose prior loses a and b the same. Exact where the
    prior is conjugate, and then derived in one line from the density of the weights.
    """
    findings = []
    for label, prior in priors.items():
        old, new = prior.base.density, prior.density.density
        if type(old) is not type(new) or not isinstance(old, Gamma | Beta):
            continue
        if old.names or new.names or prior.factor != 1:
            continue
        value, weights = prior.base.value(base.draws), _base_weights(base)
        mean = np.average(value, axis=0, weights=weights)
        variance = np.average((value - mean) ** 2, axis=0, weights=weights)
        if not np.all(variance > 0):
            continue
        if isinstance(old, Gamma):
            first, second, name = mean**2 / variance, mean / variance, "gamma"
        else:
            size = mean * (1 - mean) / variance - 1
            first, second, name = size * mean, size * (1 - mean), "beta"
        lost = [
            np.asarray(getattr(old, field)) - np.asarray(getattr(new, field))
            for field in old.domains
        ]
        shape = np.maximum(lost[0] / first, lost[1] / second)
        if np.any(shape > 0):
            figure = float(np.max(shape))
            findings.append(judge("prior_widened", figure, term=label, posterior=name))
    return findings


def _base_weights(base: Base) -> Array | None:
    if base.log_weights is None:
        return None
    return np.asarray(np.exp(base.log_weights - base.log_weights.max()))


def _likelihood_loosened(base: Base, target: Target) -> list[Finding]:
    """A likelihood taken as a whole to a power β has tail shape 1 − β where the data dominate."""
    if not base.loglik or set(target.loglik) < set(base.loglik):
        return []
    powers = []
    for name, term in target.loglik.items():
        if name not in base.loglik or term.density is not term.base or np.ndim(term.factor):
            return []
        powers.append(float(term.factor))
    power = max(powers)
    if power >= 1:
        return []
    return [judge("likelihood_loosened", 1 - power, power=f"{power:g}")]
