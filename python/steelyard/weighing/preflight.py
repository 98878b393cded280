"""What algebra knows of a target before any weight is computed."""

from __future__ import annotations

import math
from collections.abc import Mapping
from dataclasses import dataclass
from typing import Any

import numpy as np

from steelyard import _core
from steelyard.base import Base
from steelyard.base.draws import Array
from steelyard.changes.merging import PriorTarget
from steelyard.changes.noise import NoisyTerm
from steelyard.changes.target import Target
from steelyard.densities import Beta, Distribution, Gamma, Normal
from steelyard.verdicts import Finding, judge
from steelyard.weighing.series import variance_and_efficiency
from steelyard.weighing.supports import support_findings
from steelyard.weighing.weigh import base_weights

__all__ = ["preflight"]

# Above this many parameters the covariance of the draws is too costly to be worth it.
_MOST_PARAMETERS = 500


def preflight(base: Base, target: Target) -> list[Finding]:
    """Findings about supports, widened priors and weakened likelihoods."""
    findings = list(support_findings(base, target))
    loss = information_lost(base, target)
    exact = _normal_throughout(base, target, loss)
    if exact is not None:
        return findings + exact
    findings += _normal_widened(base, target.prior)
    findings += _gamma_or_beta_widened(base, target.prior)
    if loss is not None:
        # How far the data dominate is not known, so that this figure is an upper one: it never
        # condemns an answer by itself.
        findings.append(_loosened(loss, loss.share_lost, refit=math.inf))
    return findings


def _loosened(loss: Loss, figure: float, *, refit: float | None = None) -> Finding:
    if loss.noise_factor == 1:
        return judge("likelihood_loosened", figure, refit=refit, power=f"{loss.power:g}")
    return judge("noise_raised", figure, refit=refit, factor=f"{loss.noise_factor:g}")


def _normal_throughout(base: Base, target: Target, loss: Loss | None) -> list[Finding] | None:
    """
    The exact figure where every parameter has a normal prior of known sd; else None.

    For a normal posterior with covariance V, prior precision P₀ and a likelihood that loses the
    share λ of its information, the precision falls by ``λ (V⁻¹ − P₀) + P₀ − P₁``; the tail shape is
    the largest eigenvalue of ``V^½`` times that times ``V^½``.
    """
    if loss is None or base.prior is None:
        return None
    values, before, after, named = [], [], [], set()
    for label, term in base.prior.items():
        prior = target.prior.get(label, PriorTarget(term, term))
        old, new = prior.base.density, prior.density.density
        if not isinstance(old, Normal) or not isinstance(term.key, str) or old.names:
            return None
        value = prior.base.value(base.draws)
        precisions = [_tail_precision(d, value.shape[1:]) for d in (old, new)]
        if precisions[0] is None or precisions[1] is None:
            return None
        values.append(value.reshape(base.draws.size, -1))
        before.append(precisions[0].reshape(-1))
        after.append(prior.factor * precisions[1].reshape(-1))
        named.add(term.key)
    if named != set(base.parameters):
        return None
    stacked = np.concatenate(values, axis=1)
    root, unit = _root_covariance(stacked, base)
    if root is None:
        return None
    p0, p1 = np.concatenate(before) * unit**2, np.concatenate(after) * unit**2
    kept = np.eye(len(p0)) - root.T @ (p0[:, None] * root)
    fall = loss.share_lost * kept + root.T @ ((p0 - p1)[:, None] * root)
    return [_loosened(loss, float(np.linalg.eigvalsh(fall)[-1]))]


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
    root, unit = _root_covariance(np.concatenate(values, axis=1), base)
    if root is None:
        return []
    fall = root.T @ ((np.concatenate(loosened) * unit**2)[:, None] * root)
    figure = float(np.linalg.eigvalsh(fall)[-1])
    return [judge("prior_widened", figure, term=", ".join(labels), posterior="normal")]


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


def _root_covariance(values: Array, base: Base) -> tuple[Array | None, Array]:
    """
    Root of the covariance of the draws in units of their sds, and these; None if not estimable.

    The largest eigenvalue of a sample covariance of d columns from n effective draws comes out
    too large by up to ``(1 + √(d/n))²``; from ``d > n/40`` on (a third) nothing is said.
    """
    weights = base_weights(base)
    size, count = values.shape[1], weights.effective_size
    own, efficiency = variance_and_efficiency(values, base.draws, base.ordered)
    count *= float(np.median(efficiency))
    weighted = base.log_weights is not None
    square = _core.weighted_moments(values, weights.linear)[1] if weighted else own
    unit = np.where(square > 0, np.sqrt(square), 1.0)
    if size > min(_MOST_PARAMETERS, count / 40):
        return None, unit
    covariance = np.diag(square)
    if size > 1:
        covariance = _core.weighted_covariance(values, weights.linear)
    covariance = covariance / np.outer(unit, unit)
    eigenvalues, vectors = np.linalg.eigh(covariance)
    unbiased = 1 - 1 / weights.effective_size
    return vectors * np.sqrt(np.maximum(eigenvalues, 0.0) / unbiased), unit


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
        value, weights = prior.base.value(base.draws), base_weights(base).linear
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


@dataclass(frozen=True)
class Loss:
    """How much of its information the likelihood loses, and by what change."""

    share_lost: float
    power: float
    noise_factor: float


def information_lost(base: Base, target: Target) -> Loss | None:
    """
    The share of its information that a likelihood loses as a whole; None where it loses none.

    A term taken to the power β, or whose noise is multiplied by f, keeps the share β, or 1/f², of
    its information; of several terms the one that keeps most counts.
    """
    if not base.loglik or set(target.loglik) < set(base.loglik):
        return None
    kept = []
    for name, term in target.loglik.items():
        if name not in base.loglik or np.ndim(term.factor):
            return None
        is_noise = isinstance(term.density, NoisyTerm)
        if term.density is not term.base and not is_noise:
            return None
        noise = term.density.noise_factor if isinstance(term.density, NoisyTerm) else 1.0
        kept.append((float(term.factor) / noise**2, noise, float(term.factor)))
    share, noise, power = max(kept)
    return Loss(1 - share, power, noise) if share < 1 else None
