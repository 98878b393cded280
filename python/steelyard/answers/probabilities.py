"""Probabilities of events: draws are counted on both sides, and none is never a zero."""

from __future__ import annotations

import math
from dataclasses import replace

import numpy as np
import numpy.typing as npt

from steelyard import _core
from steelyard.answers.estimate import Decision, Estimate
from steelyard.answers.estimating import Scale, Series, column_blocks, finish, joined, study
from steelyard.answers.quantities import Quantity
from steelyard.answers.student import student_cdf
from steelyard.arrays import in_unit
from steelyard.base.draws import Array
from steelyard.errors import ArgumentError
from steelyard.verdicts import Finding, judge
from steelyard.weighing.series import relative_efficiency

__all__ = ["draws_either_side", "draws_within", "event_findings", "probability_of"]

Mask = npt.NDArray[np.bool_]


def probability_of(
    scale: Scale, event: Quantity, level: float | None, largest_ratio: float
) -> Estimate:
    """
    Probability of an event under the target.

    Parameters
    ----------
    scale : Scale
        What it is weighed with.
    event : Quantity
        0 and 1 for each draw.
    level : float or None
        A level to hold it against.
    largest_ratio : float
        Supremum of target over base density, normalised; +inf where not known.

    Returns
    -------
    Estimate
        Where no draw lies in the event (or outside it) the value is NaN and a bound is given.
    """
    if level is not None and not 0 < level < 1:
        raise ArgumentError("level", "a probability between 0 and 1", f"{level!r}", "Write 0.8.")
    columns = event.columns
    value = np.empty(columns.shape[1])
    inside, outside = np.empty_like(value), np.empty_like(value)
    parts = []
    for part, f in column_blocks(columns):
        value[part] = _core.weighted_mean(f, scale.weights.linear)
        parts.append(study(scale, f - value[part]))
        inside[part], outside[part] = draws_either_side(scale, f, parts[-1])
    series = joined(parts)
    upper, lower = _bounds(scale, inside == 0, outside == 0, largest_ratio)
    settled = (inside > 0) & (outside > 0)
    spread = np.sqrt(np.maximum(value * (1 - value), 0.0))
    error = np.where(settled, series.error, math.nan)
    shown = np.where(settled, value, math.nan)
    found = replace(series, error=error)
    extra = event_findings(inside, outside)
    estimate = finish(
        scale, event, shown, found, spread, extra=extra, upper_bound=upper, lower_bound=lower
    )
    if level is None:
        return estimate
    return replace(estimate, decision=_decision(estimate, value, series.error, float(level)))


def draws_within(scale: Scale, f: Array) -> Array:
    """Effective draws inside an event: ``(Σ w)²/Σ w²`` over its draws."""
    w = scale.weights.linear[:, None]
    total, squares = (w * f).sum(axis=0), (w**2 * f).sum(axis=0)
    return np.where(squares > 0, total**2 / np.where(squares > 0, squares, 1.0), 0.0)


def draws_either_side(scale: Scale, f: Array, series: Series) -> tuple[Array, Array]:
    """
    Effective draws inside and outside of an event.

    What the weights leave, ``(Σ w)²/Σ w²`` over the draws of that side, times the efficiency of
    the base draws for the event. The estimate's own error is not asked: it is too small just where
    draws are missing.
    """
    return (
        draws_within(scale, f) * series.efficiency,
        draws_within(scale, 1 - f) * series.efficiency,
    )


def event_findings(inside: Array, outside: Array) -> tuple[Finding, Finding]:
    """Effective draws inside and outside of an event, judged."""
    return (
        judge("event_draws", inside, side="inside"),
        judge("event_draws", outside, side="outside"),
    )


def _bounds(
    scale: Scale, none_inside: Mask, none_outside: Mask, largest_ratio: float
) -> tuple[Array | None, Array | None]:
    """
    ``3/ESS_base × sup ratio``: the probability of no draw at all is then e^-3, 5 %.

    The effective number of base draws is that of the base weights times the least relative
    efficiency of any parameter, since draws that repeat each other miss an event together. A
    bound of 1 or more is none.
    """
    if not (none_inside.any() or none_outside.any()):
        return None, None
    bound = 3 / (scale.base_weights.effective_size * _least_efficiency(scale)) * largest_ratio
    known = bound if bound < 1 else math.nan
    upper = np.where(none_inside, known, math.nan) if none_inside.any() else None
    lower = np.where(none_outside, 1 - known, math.nan) if none_outside.any() else None
    return upper, lower


def _least_efficiency(scale: Scale) -> float:
    """Least ``var/LRV`` of the base draws over all parameters; 1 for draws without order."""
    base = scale.base
    columns = [in_unit(values.reshape(base.draws.size, -1))[0] for values in base.draws.values()]
    least = [relative_efficiency(f, base.draws, base.ordered).min() for f in columns]
    return float(min(least, default=1.0))


def _decision(estimate: Estimate, value: Array, error: Array, level: float) -> Decision:
    """
    How surely the side of the level is the right one, where sound.

    ``T(|P̂ − γ|/error)`` with Student's distribution function for the estimate's degrees.
    """
    with np.errstate(invalid="ignore", divide="ignore"):
        distance = np.nan_to_num(np.abs(value - level) / error, nan=0.0)
    shape = np.shape(estimate.value)
    sound = np.broadcast_to(estimate.verdict.is_sound, shape).reshape(-1)
    right = np.where(sound, student_cdf(distance, np.ravel(estimate.degrees)), math.nan)
    above = value > level
    if not shape:
        return Decision(level, bool(above[0]), float(right[0]))
    return Decision(level, above.reshape(shape), right.reshape(shape))
