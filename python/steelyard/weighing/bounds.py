"""How large a ratio of target to base can be at all, where the densities say so."""

from __future__ import annotations

import math

import numpy as np

from steelyard.base import Base
from steelyard.base.draws import Array
from steelyard.changes.target import Target
from steelyard.densities import Beta, Distribution, Gamma, HalfNormal, Normal

__all__ = ["largest_ratio", "supremum"]


def largest_ratio(base: Base, target: Target | None, log_mean_ratio: float) -> float:
    """
    Supremum over all parameters of target over base density, both normalised; +inf if unknown.

    Known without a change (1), and for swaps within a family whose log ratio is concave.
    """
    if target is None or not target.terms:
        return 1.0
    if target.loglik or target.ratios:
        return math.inf
    total = 0.0
    for prior in target.prior.values():
        old, new = prior.base.density, prior.density.density
        known = isinstance(old, Distribution) and isinstance(new, Distribution)
        if not known or old.names or new.names or prior.factor != 1:
            return math.inf
        shape = prior.base.value(base.draws).shape[1:]
        total += float(np.broadcast_to(supremum(new, old), shape).sum())
    exponent = total - log_mean_ratio
    return math.exp(exponent) if exponent < 700 else math.inf


def supremum(new: Distribution, old: Distribution) -> Array:
    """``sup log(new/old)`` elementwise: at the stationary point of a concave log ratio."""
    if isinstance(new, Normal) and isinstance(old, Normal):
        m1, s1, m0, s0 = (np.asarray(v, float) for v in (new.mean, new.sd, old.mean, old.sd))
        gain = 1 / s1**2 - 1 / s0**2
        peak = (m1 / s1**2 - m0 / s0**2) / np.where(gain > 0, gain, 1.0)
    elif isinstance(new, HalfNormal) and isinstance(old, HalfNormal):
        gain = np.asarray(old.scale, float) - np.asarray(new.scale, float)
        peak = np.zeros_like(gain)
    elif isinstance(new, Gamma) and isinstance(old, Gamma):
        shape = np.asarray(new.shape, float) - np.asarray(old.shape, float)
        gain = np.asarray(new.rate, float) - np.asarray(old.rate, float)
        gain = np.where(shape < 0, -1.0, gain)
        peak = shape / np.where(gain > 0, gain, 1.0)
    elif isinstance(new, Beta) and isinstance(old, Beta):
        a = np.asarray(new.a, float) - np.asarray(old.a, float)
        b = np.asarray(new.b, float) - np.asarray(old.b, float)
        gain = np.where((a < 0) | (b < 0), -1.0, a + b)
        peak = a / np.where(gain > 0, gain, 1.0)
    else:
        return np.asarray(math.inf)
    same = np.logical_and.reduce(
        [np.asarray(getattr(new, n)) == np.asarray(getattr(old, n)) for n in old.domains]
    )
    ratio = _log_ratio_at(new, old, peak)
    return np.where(same, 0.0, np.where(gain > 0, ratio, math.inf))


def _log_ratio_at(new: Distribution, old: Distribution, peak: Array) -> Array:
    # At an edge with zero density both logs may be −inf; the ratio's limit is finite, so step in.
    low, high = new.support()
    inner = np.clip(peak, np.nextafter(low, math.inf), np.nextafter(high, -math.inf))
    return new.log_density(inner) - old.log_density(inner)
