"""Differences from the base over the same draws, and ratios of constants."""

from __future__ import annotations

import math
from typing import Any

import numpy as np

from steelyard import _core
from steelyard.answers.estimate import Estimate
from steelyard.answers.estimating import (
    Scale,
    Series,
    column_blocks,
    finish,
    joined,
    moments,
    study_pair,
)
from steelyard.answers.probabilities import draws_within, event_findings
from steelyard.answers.quantities import Quantity
from steelyard.base.draws import Array
from steelyard.changes import Target
from steelyard.errors import ArgumentError, PriorError

__all__ = ["log_evidence_ratio_of", "shift_of"]


def shift_of(scale: Scale, quantity: Quantity, of: Any) -> Estimate:
    """Target minus base of a mean, an sd, or a quantile, with the error of the pair."""
    work = _read_kind(of)
    if quantity.is_event and work is not _mean_shift:
        raise ArgumentError("of", "'mean' for an event", repr(of), "A probability is a mean.")
    columns = quantity.columns
    value, variance = np.empty(columns.shape[1]), np.empty(columns.shape[1])
    parts = []
    for part, f in column_blocks(columns):
        value[part], series, variance[part] = work(scale, f)
        parts.append(series)
    series = joined(parts)
    if not quantity.is_event:
        return finish(scale, quantity, value, series, variance)
    inside, outside = draws_within(scale, columns), draws_within(scale, 1 - columns)
    settled = (inside > 0) & (outside > 0)
    series = Series(np.where(settled, series.error, math.nan), series.shape, series.p_value)
    extra = event_findings(inside, outside)
    return finish(
        scale, quantity, np.where(settled, value, math.nan), series, variance, extra=extra
    )


def _read_kind(of: Any) -> Any:
    if isinstance(of, str) and of in ("mean", "sd"):
        return _mean_shift if of == "mean" else _sd_shift
    if isinstance(of, tuple) and len(of) == 2 and of[0] == "quantile":
        p = of[1]
        if isinstance(p, int | float | np.floating) and 0 < p < 1:
            return lambda scale, f: _quantile_shift(scale, f, float(p))
    raise ArgumentError(
        "of", "'mean', 'sd' or ('quantile', p) with 0 < p < 1", repr(of), "Choose one of them."
    )


def _pair(scale: Scale, psi1: Array, psi0: Array) -> tuple[Series, Array]:
    series = study_pair(scale, psi1, psi0)
    z = scale.count * (
        scale.weights.linear[:, None] * psi1 - scale.base_weights.linear[:, None] * psi0
    )
    return series, _core.mean_square(z)


def _mean_shift(scale: Scale, f: Array) -> tuple[Array, Series, Array]:
    one, _ = moments(scale, f)
    zero, _ = moments(scale, f, scale.base_weights.linear)
    return one - zero, *_pair(scale, f - one, f - zero)


def _sd_shift(scale: Scale, f: Array) -> tuple[Array, Series, Array]:
    def psi(mean: Array, sd: Array) -> Array:
        return ((f - mean) ** 2 - sd**2) / np.where(sd > 0, 2 * sd, 1.0)

    one = moments(scale, f)
    zero = moments(scale, f, scale.base_weights.linear)
    return one[1] - zero[1], *_pair(scale, psi(*one), psi(*zero))


def _quantile_shift(scale: Scale, f: Array, p: float) -> tuple[Array, Series, Array]:
    """
    Shift of a quantile; influence ``−(1{x ≤ q} − p)/density(q)``.

    The density is the slope of the quantile function between p ± its own error, at least two
    draws apart, so that the error is consistent with that of a single quantile.
    """
    ends, influences = [], []
    for w in (scale.weights.linear, scale.base_weights.linear):
        q, slope = _quantile_and_slope(scale, f, w, p)
        below = np.where(f == q, 0.5, (f < q).astype(np.float64))
        ends.append(q)
        influences.append(-slope * (below - _core.weighted_mean(below, w)))
    return ends[0] - ends[1], *_pair(scale, influences[0], influences[1])


def _quantile_and_slope(scale: Scale, f: Array, w: Array, p: float) -> tuple[Array, Array]:
    size = 1 / float((w**2).sum())
    half = max(math.sqrt(p * (1 - p) / size), 2 / size)
    ends = np.array([max(p - half, 0.0), min(p + half, 1.0)])
    width = f.shape[1]
    probs = np.repeat(np.array([[p], [ends[0]], [ends[1]]]), width, axis=1)
    q, low, high = _core.quantile(f, w, probs)
    return q, (high - low) / (ends[1] - ends[0])


def log_evidence_ratio_of(scale: Scale, target: Target | None) -> Estimate:
    """``log Σ v exp ℓ``; influence ``S w − S v``."""
    if target is not None:
        _refuse_improper(target)
    ones = np.ones((scale.count, 1))
    series, variance = _pair(scale, ones, ones)
    quantity = Quantity("log evidence ratio", ones[:, 0])
    return finish(scale, quantity, np.array([scale.weights.log_mean_ratio]), series, variance)


def _refuse_improper(target: Target) -> None:
    for label, prior in target.prior.items():
        if not (prior.base.is_proper and prior.density.is_proper):
            raise PriorError(
                "log_evidence_ratio",
                "changed priors that integrate to one",
                f"the improper prior of {label!r}",
                "A ratio of evidences is arbitrary under an improper prior: state a proper one.",
            )
        if prior.factor != 1:
            raise PriorError(
                "log_evidence_ratio",
                "changed priors that integrate to one",
                f"the prior of {label!r} to the power {prior.factor:g}, of unknown constant",
                "State the powered prior as a distribution with swap_prior.",
            )
