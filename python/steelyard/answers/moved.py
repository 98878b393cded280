"""Answers whose draws have moved, and how they are held against the base's own draws."""

from __future__ import annotations

import math
from collections.abc import Callable
from dataclasses import dataclass, replace
from typing import Any

import numpy as np

from steelyard.answers.estimate import Estimate, Estimates
from steelyard.answers.estimating import Scale, mean_of
from steelyard.answers.quantities import Quantity, labelled, read_quantity
from steelyard.answers.shifts import shift_of
from steelyard.arrays import Frozen
from steelyard.base.draws import Array, Draws
from steelyard.errors import ChangeError
from steelyard.weighing.weigh import Weights

__all__ = [
    "Moved",
    "both_of",
    "constant_of_moved",
    "divergence_of_moved",
    "joined_values",
    "refuse_moved",
    "shift_of_moved",
    "with_both",
]


@dataclass(frozen=True, eq=False)
class Moved(Frozen):
    """
    Where draws that are not the base's own came from.

    Attributes
    ----------
    origin : Scale
        The base with its own draws and weights.
    is_paired : bool
        Whether draw s of the answer was made from draw s of the base.
    log_ratio : numpy.ndarray
        Log density of target minus base at each draw of the answer, ``(n,)``.
    log_constant : Estimate or None
        Log ratio of constants, where it does not come from the weights.
    """

    origin: Scale
    is_paired: bool
    log_ratio: Array
    log_constant: Estimate | None = None


def refuse_moved(what: str, next_step: str) -> None:
    """The error for what only the base's own draws can tell."""
    raise ChangeError(what, "an answer from the base's own draws", "draws that moved", next_step)


def shift_of_moved(scale: Scale, moved: Moved, quantity: Any, of: Any) -> Any:
    """Target minus base, where each has draws of its own."""

    def work(after: Quantity, before: Quantity) -> Estimate:
        if moved.is_paired:
            pair = replace(scale, base_weights=moved.origin.base_weights)
            return shift_of(pair, after, of, before.columns)
        return shift_of(both_of(scale, moved), joined_values(after, before), of)

    return with_both(scale, moved, quantity, work, events=True)


def with_both(
    scale: Scale,
    moved: Moved,
    quantity: Any,
    work: Callable[[Quantity, Quantity], Any],
    *,
    events: bool = False,
) -> Any:
    """The work done on quantities read from the draws of the answer and from those of the base."""
    before = moved.origin.base
    several = labelled(quantity, scale.base, events=events)
    if several is None:
        after = read_quantity(quantity, scale.base, events=events)
        return work(after, read_quantity(quantity, before, events=events))
    olds = labelled(quantity, before, events=events) or {}
    return Estimates({label: work(q, olds[label]) for label, q in several.items()})


def both_of(scale: Scale, moved: Moved) -> Scale:
    """
    One scale over the draws of the base and of the answer, chain after chain.

    Base draws have no weight in the target and target draws none in the base, so that the errors
    of independent draws add up.
    """
    old, new = moved.origin.base.draws, scale.base.draws
    starts = np.concatenate([old.starts, old.size + new.starts[1:]])
    base = replace(scale.base, draws=Draws({}, starts))
    target = _padded(scale.weights, old.size, 0)
    own = _padded(moved.origin.base_weights, 0, new.size)
    return Scale(base, target, own, scale.findings, is_joined=True)


def _padded(weights: Weights, front: int, back: int) -> Weights:
    def wide(values: Array, fill: float) -> Array:
        return np.concatenate([np.full(front, fill), values, np.full(back, fill)])

    return replace(
        weights,
        total=wide(weights.log, -math.inf),
        linear=wide(weights.linear, 0.0),
        raw=wide(weights.raw, 0.0),
        is_smoothed=False,
    )


def joined_values(after: Quantity, before: Quantity) -> Quantity:
    """A quantity at the draws of the base, then at those of the answer."""
    return replace(after, values=np.concatenate([before.values, after.values]))


def constant_of_moved(moved: Moved, own: Estimate) -> Estimate:
    """Log ratio of constants: that of the weights, for draws made from the base's one by one."""
    if moved.log_constant is not None:
        return moved.log_constant
    if not moved.is_paired:
        refuse_moved(
            "log_evidence_ratio", "Draws of the target's prior say nothing of the base's constant."
        )
    return own


def divergence_of_moved(scale: Scale, moved: Moved, log_constant: Estimate) -> Estimate:
    """``E ℓ − log Z`` with ℓ target minus base; the errors of both parts are added."""
    reached = np.where(scale.weights.linear > 0, moved.log_ratio, 0.0)
    mean = mean_of(scale, Quantity("divergence of target from base", reached))
    return replace(
        mean,
        value=mean.value - log_constant.value,
        error=math.hypot(float(mean.error), float(log_constant.error)),
    )
