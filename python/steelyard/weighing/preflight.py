"""What algebra knows of a target before any weight is computed."""

from __future__ import annotations

from collections.abc import Mapping
from typing import Any

import numpy as np

from steelyard.base import Base
from steelyard.base.draws import Array
from steelyard.changes.merging import PriorTarget
from steelyard.changes.noise import NoisyTerm
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
        about = _distance_from_mean(prior, base)
        if about is None:
            continue
        shape = about.shape[1:]
        before = _tail_precision(prior.base.density, shape)
        after = _tail_precision(prior.density.density, shape)
        if before is None or after is None:
            continue
        values.append(about.reshape(base.draws.size, -1))
        loosened.append((before - prior.factor * after).reshape(-1))
        labels.append(label)
    if not values or not np.any(np.concatenate(loosened) > 0):
        return []
    stacked = np.concatenate(values, axis=1)
    if stacked.shape[1] > min(_MOST_PARAMETERS, base.draws.size // 10):
        return []
    shape_by_algebra = _largest_eigenvalue(stacked, np.concatenate(loosened), _base_weights(base))
    term = ", ".join(labels)
    return [judge("prior_widened", shape_by_algebra, term=term, posterior="normal")]


def _distance_from_mean(prior: PriorTarget, base: Base) -> Array | None:
    """
    What a normal prior is about, without a mean that is itself a parameter.

    With a named mean the quadratic form is in ``value − mean``; where old and new prior name
    different means it is joint in both, and nothing is said.
    """
    old, new = prior.base.density, prior.density.density
    if not isinstance(old, Normal):
        return None
    value = prior.base.value(base.draws)
    named = old.mean if isinstance(old.mean, str) else None
    centre = getattr(new, "mean", getattr(new, "location", None))
    if named is None and not isinstance(centre, str):
        return value
    if named is None or (centre is not None and centre != named):
        return None
    mean = base.draws.look_up(named)
    return np.asarray(value - mean.reshape(mean.shape + (1,) * (value.ndim - mean.ndim)))


def _largest_eigenvalue(values: Array, loosened: Array, weights: Array | None) -> float:
    """Largest eigenvalue of ``V^½ A V^½``, in units of the draws' sds so that scale cancels."""
    covariance = np.atleast_2d(np.cov(values, rowvar=False, aweights=weights))
    sd = np.sqrt(np.diag(covariance))
    unit = np.where(sd > 0, sd, 1.0)
    eigenvalues, vectors = np.linalg.eigh(covariance / np.outer(unit, unit))
    root = vectors * np.sqrt(np.maximum(eigenvalues, 0.0))
    return float(np.linalg.eigvalsh(root.T @ ((loosened * unit**2)[:, None] * root))[-1])


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
    """
    Tail shape of the weights where every likelihood term loses information.

    A term taken to the power β, or whose noise is multiplied by f, keeps the share β, or 1/f², of
    its information. Where the data dominate, the shape is one less the share that is kept: at
    least one less the largest of the terms.
    """
    if not base.loglik or set(target.loglik) < set(base.loglik):
        return []
    kept = []
    for name, term in target.loglik.items():
        if name not in base.loglik or np.ndim(term.factor):
            return []
        noise = term.density.noise_factor if isinstance(term.density, NoisyTerm) else 1.0
        if term.density is not term.base and not isinstance(term.density, NoisyTerm):
            return []
        kept.append((float(term.factor) / noise**2, noise, float(term.factor)))
    share, noise, power = max(kept)
    if share >= 1:
        return []
    if noise == 1:
        return [judge("likelihood_loosened", 1 - share, power=f"{power:g}")]
    return [judge("noise_raised", 1 - share, factor=f"{noise:g}")]
