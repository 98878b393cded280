"""Differences from the base over the same draws, and ratios of constants."""

from __future__ import annotations

import math
from dataclasses import replace
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
    study,
    study_pair_and_spread,
)
from steelyard.answers.probabilities import draws_either_side, event_findings
from steelyard.answers.quantities import Quantity
from steelyard.arrays import in_unit
from steelyard.base.draws import Array
from steelyard.changes import Target
from steelyard.errors import ArgumentError, PriorError
from steelyard.verdicts import judge

__all__ = ["log_evidence_ratio_of", "shift_of"]


def shift_of(scale: Scale, quantity: Quantity, of: Any, before: Array | None = None) -> Estimate:
    """
    Target minus base of a mean, an sd, or a quantile, with the error of the pair.

    `before` are the columns of the quantity at the base's own draws, where those of the target
    were made from them one by one; else both sides share the draws.
    """
    work = _read_kind(of)
    if quantity.is_event and work is not _mean_shift:
        raise ArgumentError("of", "'mean' for an event", repr(of), "A probability is a mean.")
    columns = quantity.columns
    value, spread = np.empty(columns.shape[1]), np.empty(columns.shape[1])
    parts = []
    for part, f in column_blocks(columns):
        own = f if before is None else before[:, part]
        value[part], series, spread[part] = work(scale, f, own)
        parts.append(series)
    series = joined(parts)
    if not quantity.is_event:
        reach = judge("quantile_reach", np.zeros(len(value)), spoken=np.isinf(series.error))
        return finish(scale, quantity, value, series, spread, extra=(reach,))
    inside, outside = _sides(scale, columns)
    settled = (inside > 0) & (outside > 0)
    series = replace(series, error=np.where(settled, series.error, math.nan))
    extra = event_findings(inside, outside)
    return finish(scale, quantity, np.where(settled, value, math.nan), series, spread, extra=extra)


def _sides(scale: Scale, columns: Array) -> tuple[Array, Array]:
    """Effective draws of the target inside and outside of events."""
    inside, outside = np.empty(columns.shape[1]), np.empty(columns.shape[1])
    for part, f in column_blocks(columns):
        p = _core.weighted_mean(f, scale.weights.linear)
        inside[part], outside[part] = draws_either_side(scale, f, study(scale, f - p))
    return inside, outside


def _read_kind(of: Any) -> Any:
    if isinstance(of, str) and of in ("mean", "sd"):
        return _mean_shift if of == "mean" else _sd_shift
    if isinstance(of, tuple) and len(of) == 2 and of[0] == "quantile":
        p = of[1]
        if isinstance(p, int | float | np.floating) and 0 < p < 1:
            return lambda scale, f, own: _quantile_shift(scale, f, own, float(p))
    raise ArgumentError(
        "of", "'mean', 'sd' or ('quantile', p) with 0 < p < 1", repr(of), "Choose one of them."
    )


def _mean_shift(scale: Scale, f: Array, own: Array) -> tuple[Array, Series, Array]:
    f, own, unit = _in_one_unit(f, own)
    one, _ = moments(scale, f)
    zero, _ = moments(scale, own, scale.base_weights.linear)
    series, spread = study_pair_and_spread(scale, f - one, own - zero)
    return _times(one - zero, unit), series.times(unit), _times(spread, unit)


def _in_one_unit(f: Array, own: Array) -> tuple[Array, Array, Array]:
    if own is f:
        f, unit = in_unit(f)
        return f, f, unit
    both, unit = in_unit(np.concatenate([f, own]))
    return both[: len(f)], both[len(f) :], unit


def _sd_shift(scale: Scale, f: Array, own: Array) -> tuple[Array, Series, Array]:
    def psi(f: Array, mean: Array, sd: Array) -> Array:
        return ((f - mean) ** 2 - sd**2) / np.where(sd > 0, 2 * sd, 1.0)

    f, own, unit = _in_one_unit(f, own)
    one = moments(scale, f)
    zero = moments(scale, own, scale.base_weights.linear)
    series, spread = study_pair_and_spread(scale, psi(f, *one), psi(own, *zero))
    return _times(one[1] - zero[1], unit), series.times(unit), _times(spread, unit)


def _times(values: Array, unit: Array) -> Array:
    """Values in the quantity's own unit; the difference of two huge ones may be +inf."""
    with np.errstate(over="ignore"):
        return np.asarray(values * unit)


def _quantile_shift(scale: Scale, f: Array, own: Array, p: float) -> tuple[Array, Series, Array]:
    """
    Shift of a quantile; influence ``−(1{x ≤ q} − p)/density(q)``.

    The density is the slope of the quantile function between p ± the error of the distribution
    function there, at least two draws apart. Where that leaves (0, 1) the error is +inf.
    """
    ends, slopes, influences = [], [], []
    reached = np.ones(f.shape[1], dtype=np.bool_)
    for weights, x in ((scale.weights, f), (scale.base_weights, own)):
        w = weights.linear
        q = _core.quantile(x, w, np.full((1, x.shape[1]), p))[0]
        below = np.where(x == q, 0.5, (x < q).astype(np.float64))
        psi = below - _core.weighted_mean(below, w)
        half = np.maximum(study(scale, psi, w, weights.raw).error, 2 / weights.effective_size)
        reached &= (p - half > 0) & (p + half < 1)
        probs = np.clip(np.stack([p - half, p + half]), 0.0, 1.0)
        low, high = _core.quantile(x, w, probs)
        ends.append(q)
        with np.errstate(over="ignore"):
            slopes.append((high / 2 - low / 2) / ((probs[1] - probs[0]) / 2))
        influences.append(-psi)
    both, unit = in_unit(np.stack(slopes))
    series, spread = study_pair_and_spread(scale, both[0] * influences[0], both[1] * influences[1])
    constant = (f == f[:1]).all(axis=0)
    error = np.where(reached | constant, series.times(unit).error, math.inf)
    with np.errstate(over="ignore"):
        moved = ends[0] - ends[1]
    return moved, replace(series, error=error), _times(spread, unit)


def log_evidence_ratio_of(scale: Scale, target: Target | None) -> Estimate:
    """``log Σ v exp ℓ``; influence ``S w − S v``."""
    if target is not None:
        _refuse_improper(target)
    ones = np.ones((scale.count, 1))
    series, spread = study_pair_and_spread(scale, ones, ones)
    quantity = Quantity("log evidence ratio", ones[:, 0])
    return finish(scale, quantity, np.array([scale.weights.log_mean_ratio]), series, spread)


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
