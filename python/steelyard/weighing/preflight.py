"""What algebra knows of a target before any weight is computed."""

from __future__ import annotations

import math
from collections.abc import Iterator, Mapping
from typing import Any

import numpy as np

from steelyard.base import Base
from steelyard.base.draws import Array
from steelyard.changes.merging import PriorTarget
from steelyard.changes.target import Target
from steelyard.densities import Distribution, Normal
from steelyard.verdicts import Finding, judge

__all__ = ["preflight", "support_findings"]

# Above this many parameters the covariance of the draws is too costly to be worth it.
_MOST_PARAMETERS = 500


def preflight(base: Base, target: Target) -> list[Finding]:
    """Findings about supports, widened normal priors and weakened likelihoods."""
    findings = list(support_findings(base, target))
    findings += _prior_widened(base, target.prior)
    findings += _likelihood_loosened(base, target)
    return findings


def support_findings(base: Base, target: Target) -> Iterator[Finding]:
    """Support gaps of swapped priors, and pressure of the base at a limit that moved."""
    for prior in target.prior.values():
        if not prior.is_swapped:
            continue
        old_limits, new_limits = _support(prior.base, base), _support(prior.density, base)
        if old_limits is not None and _covers_the_line(old_limits):
            continue
        if old_limits is None or new_limits is None:
            yield judge("support_unknown", term=prior.base.label)
            continue
        gaps = [
            ("lower", old_limits[0], new_limits[0] < old_limits[0]),
            ("upper", old_limits[1], new_limits[1] > old_limits[1]),
        ]
        if not any(bool(np.any(gap)) for _, _, gap in gaps):
            continue
        old_text, new_text = _interval(*old_limits), _interval(*new_limits)
        yield judge("support_gap", term=prior.base.label, old=old_text, new=new_text)
        for side, edge, gap in gaps:
            if np.any(gap):
                yield from _edge_pressure(prior, base, edge, side)


def _support(term: Any, base: Base) -> tuple[Array, Array] | None:
    """Limits of a term's density; None where they are not known."""
    density = term.density
    if isinstance(density, Distribution):
        value = term.value(base.draws)
        return density.support(value.shape, look_up=base.draws.look_up)
    if hasattr(density, "support") and callable(density.support):
        low, high = density.support()
        return np.asarray(low, dtype=np.float64), np.asarray(high, dtype=np.float64)
    if hasattr(density, "dim"):  # frozen multivariate normal and Student-t: the whole space
        name = type(density).__name__
        if name.startswith(("multivariate_normal", "multivariate_t")):
            return np.asarray(-math.inf), np.asarray(math.inf)
    return None


def _covers_the_line(limits: tuple[Array, Array]) -> bool:
    return bool(np.all(limits[0] == -math.inf) and np.all(limits[1] == math.inf))


def _interval(low: Array, high: Array) -> str:
    def limit(values: Array) -> str:
        spread = np.unique(values)
        return f"{spread[0]:g}" if spread.size == 1 else f"{spread[0]:g}…{spread[-1]:g}"

    return f"from {limit(low)} to {limit(high)}"


def _edge_pressure(prior: PriorTarget, base: Base, edge: Array, side: str) -> Iterator[Finding]:
    """Density of the base at a limit, in units of one over the base sd, from the draws near it."""
    value = prior.base.value(base.draws)
    limit = np.broadcast_to(edge, value.shape)
    if not np.isfinite(limit).all():
        return
    distance = (value - limit if side == "lower" else limit - value).reshape(base.draws.size, -1)
    sd = value.reshape(base.draws.size, -1).std(axis=0)
    sd = np.where(sd > 0, sd, 1.0)
    width = 0.2
    density = ((distance / sd) < width).mean(axis=0) / width
    yield judge(
        "edge_pressure",
        float(density.max()),
        term=prior.base.label,
        edge=f"{np.unique(limit)[0]:g}",
    )


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


def _prior_widened(base: Base, priors: Mapping[str, PriorTarget]) -> list[Finding]:
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
    return [judge("prior_widened", float(shape_by_algebra), term=", ".join(labels))]


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
