"""What algebra knows of a target before any weight is computed."""

from __future__ import annotations

import math
from collections.abc import Mapping
from dataclasses import dataclass, replace
from typing import Any

import numpy as np

from steelyard import _core
from steelyard.arrays import in_unit
from steelyard.base import Base
from steelyard.base.draws import Array
from steelyard.base.pooling import Pooling
from steelyard.changes.merging import PriorTarget
from steelyard.changes.noise import NoisyTerm
from steelyard.changes.target import Target
from steelyard.densities import Distribution, Normal
from steelyard.densities.tails import Tails
from steelyard.verdicts import Finding, judge
from steelyard.weighing.matched import gamma_or_beta_widened
from steelyard.weighing.series import variance_and_efficiency
from steelyard.weighing.supports import support_findings
from steelyard.weighing.weigh import base_weights

__all__ = [
    "distance_from_mean",
    "precision_lost",
    "preflight",
    "root_covariance",
    "slower_precision",
    "tail_precision",
]

# Above this many parameters the covariance of the draws is too costly to be worth it.
_MOST_PARAMETERS = 500


def preflight(base: Base, target: Target) -> list[Finding]:
    """Findings about supports, widened priors and weakened likelihoods."""
    findings = list(support_findings(base, target))
    if base.draws.pooling is not None:
        return findings + _from_the_broadest(base, target, base.draws.pooling)
    return findings + _algebra(base, target)


def _algebra(base: Base, target: Target) -> list[Finding]:
    loss = information_lost(base, target)
    exact = _normal_throughout(base, target, loss)
    if exact is not None:
        return exact
    findings = _normal_widened(base, target.prior)
    findings += gamma_or_beta_widened(base, target.prior)
    if loss is not None:
        # How far the data dominate is not known, so that this figure is an upper one: it never
        # condemns an answer by itself.
        findings.append(_loosened(loss, loss.share_lost, refit=math.inf))
    return findings


def _from_the_broadest(base: Base, target: Target, pooling: Pooling) -> list[Finding]:
    """
    What algebra knows of the weights from the fit of a pool that reaches furthest.

    The mixture is at least a share of each fit, so that its weights have at most the smallest of
    the tail shapes that they would have from one fit alone.
    """
    least: list[Finding] | None = None
    for number, prior in enumerate(pooling.priors):
        if not prior or set(prior) != set(base.prior or {}):
            continue
        draws = replace(base.draws, pooling=None)
        alone = replace(base, draws=draws, prior=prior, log_weights=pooling.log_weights(number))
        if not pooling.same_likelihood:
            alone = replace(alone, loglik=None)
        targets = {}
        for label, term in prior.items():
            changed = target.prior.get(label)
            density = base.prior[label] if changed is None else changed.density  # type: ignore[index]
            factors = () if changed is None else changed.factors
            targets[label] = PriorTarget(term.resolved(draws), density.resolved(draws), factors)
        found = _algebra(alone, replace(target, prior=targets))
        if not found:
            return []
        if least is None or _largest(found) < _largest(least):
            least = found
    return least or []


def _largest(findings: list[Finding]) -> float:
    return max(float(finding.figure.max()) for finding in findings)


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
        precisions = [tail_precision(d, value, base) for d in (old, new)]
        if precisions[0] is None or precisions[1] is None:
            return None
        values.append(value.reshape(base.draws.size, -1))
        before.append(precisions[0].reshape(-1))
        after.append(prior.factor * precisions[1].reshape(-1))
        named.add(term.key)
    if named != set(base.parameters):
        return None
    stacked = np.concatenate(values, axis=1)
    root, unit = root_covariance(stacked, base)
    if root is None:
        return None
    p0, p1 = np.concatenate(before) * unit**2, np.concatenate(after) * unit**2
    kept = np.eye(len(p0)) - root.T @ (p0[:, None] * root)
    fall = loss.share_lost * kept + root.T @ ((p0 - p1)[:, None] * root)
    return [_loosened(loss, float(np.linalg.eigvalsh(fall)[-1]))]


def tail_precision(density: Any, value: Array, base: Base) -> Array | None:
    """
    Precision of the slower of a density's tails: 0 for heavier than normal ones.

    None where it is not known, differs from draw to draw, or both ends are lighter or bounded.
    """
    if not isinstance(density, Distribution):
        return None
    slower = slower_precision(density.tails(value.shape, look_up=base.draws.look_up))
    if (slower.ndim == value.ndim and slower.shape[0] > 1) or not np.isfinite(slower).all():
        return None
    along = np.broadcast_shapes(slower.shape, (1, *value.shape[1:]))
    return np.asarray(np.broadcast_to(slower, along)[0])


def slower_precision(tails: Tails) -> Array:
    """Precision of the slower of two tails."""
    return np.minimum(tails.lower.precision, tails.upper.precision)


def _normal_widened(base: Base, priors: Mapping[str, PriorTarget]) -> list[Finding]:
    """
    Tail shape of the weights by algebra where normal priors are widened.

    For a normal posterior with covariance V and prior precisions that fall by A (diagonal), the
    weights grow like ``exp(½ x'A x)`` and their tail shape is the largest eigenvalue of
    ``V^½ A V^½``; their variance is finite below ½, their mean below 1.
    """
    values, loosened, labels = [], [], []
    for label, prior in priors.items():
        found = precision_lost(prior, base)
        if found is None:
            continue
        values.append(found[0].reshape(base.draws.size, -1))
        loosened.append(found[1])
        labels.append(label)
    if not values or not np.any(np.concatenate(loosened) > 0):
        return []
    # One alone needs no copy.
    together = values[0] if len(values) == 1 else np.concatenate(values, axis=1)
    root, unit = root_covariance(together, base)
    if root is None:
        return []
    fall = root.T @ ((np.concatenate(loosened) * unit**2)[:, None] * root)
    figure = float(np.linalg.eigvalsh(fall)[-1])
    return [judge("prior_widened", figure, term=", ".join(labels), posterior="normal")]


def precision_lost(prior: PriorTarget, base: Base) -> tuple[Array, Array] | None:
    """What a normal prior is about, and the tail precision that it loses; None where not known."""
    about = distance_from_mean(prior, base)
    if about is None:
        return None
    before = tail_precision(prior.base.density, about, base)
    after = tail_precision(prior.density.density, about, base)
    if before is None or after is None:
        return None
    return about, (before - prior.factor * after).reshape(-1)


def distance_from_mean(prior: PriorTarget, base: Base) -> Array | None:
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


def root_covariance(values: Array, base: Base) -> tuple[Array | None, Array]:
    """
    Root of the covariance of the draws in units of their sds, and these; None if not estimable.

    The largest eigenvalue of a sample covariance of d columns from n effective draws comes out
    too large by up to ``(1 + √(d/n))²``; from ``d > n/40`` on (a third) nothing is said.
    """
    weights = base_weights(base)
    values, power = in_unit(values)
    size, count = values.shape[1], weights.effective_size
    own, efficiency = variance_and_efficiency(values, base.draws, base.ordered)
    count *= float(np.median(efficiency))
    weighted = base.log_weights is not None
    square = _core.weighted_moments(values, weights.linear)[1] if weighted else own
    unit = np.where(square > 0, np.sqrt(square), 1.0)
    natural = unit * power
    with np.errstate(over="ignore", under="ignore"):
        squares = natural**2
    if size > min(_MOST_PARAMETERS, count / 40) or not (np.isfinite(squares) & (squares > 0)).all():
        return None, natural
    covariance = np.diag(square)
    if size > 1:
        covariance = _core.weighted_covariance(values, weights.linear)
    covariance = covariance / np.outer(unit, unit)
    eigenvalues, vectors = np.linalg.eigh(covariance)
    unbiased = 1 - 1 / weights.effective_size
    return vectors * np.sqrt(np.maximum(eigenvalues, 0.0) / unbiased), natural


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
