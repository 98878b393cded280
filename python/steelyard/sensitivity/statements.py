"""Late statements of an expert: the least change under which events have given probabilities."""

from __future__ import annotations

import math
from collections.abc import Mapping
from dataclasses import dataclass
from html import escape
from typing import Any

import numpy as np

from steelyard import _core
from steelyard.answers.quantities import event_mask
from steelyard.arrays import Frozen, ReadOnly
from steelyard.base import Base
from steelyard.base.draws import Array
from steelyard.changes import Change
from steelyard.changes import log_ratio as changed_by
from steelyard.digits import short
from steelyard.errors import ArgumentError, ArgumentTypeError, QuantityError
from steelyard.sensitivity.bounds import log_base_of
from steelyard.table import Table

__all__ = ["Statements", "statements"]

_STEPS = 200
# A multiplier beyond this says that the statements can only be met in the limit, or not at all.
_LARGEST = 40.0


@dataclass(frozen=True, eq=False)
class Statements(Frozen):
    """
    The least-divergence change under which stated events have their stated probabilities.

    Attributes
    ----------
    change : Change
        For ``fit.reweigh``, alone or combined with others.
    stated, before : mapping of str to float
        Stated probabilities, and those of the base.
    multipliers : mapping of str to float
        Log factor of each event.
    largest_ratio : float
        Largest over smallest weight: weights are bounded by it in advance, whatever the draws.
    divergence : float
        Kullback–Leibler divergence of the target from the base.
    """

    change: Change
    stated: Mapping[str, float]
    before: Mapping[str, float]
    multipliers: Mapping[str, float]
    largest_ratio: float
    divergence: float

    def table(self) -> Table:
        """One row a statement."""
        columns: dict[str, list[Any]] = {
            "event": list(self.stated),
            "base": list(self.before.values()),
            "stated": list(self.stated.values()),
            "log_factor": list(self.multipliers.values()),
        }
        return Table(columns)

    def __str__(self) -> str:
        return (
            f"{self.table()}\nweights vary by a factor of at most {short(self.largest_ratio)}; "
            f"divergence {short(self.divergence)}.\n"
            "Statements made after the data were seen are no prior: say so where they are used."
        )

    def __repr__(self) -> str:
        return str(self)

    def _repr_html_(self) -> str:
        return f"<pre>{escape(str(self))}</pre>"


def statements(base: Base, stated: Mapping[Any, float]) -> Statements:
    """The least change that meets all statements; see ``Fit.state``."""
    if not isinstance(stated, Mapping) or not stated:
        raise ArgumentTypeError(
            "stated", "{event: probability}", repr(stated), 'Write {"rate[3] < 0.1": 0.8}.'
        )
    log_base = log_base_of(base)
    v = np.exp(log_base)
    labels, masks, goals = [], [], []
    for event, probability in stated.items():
        mask = event_mask(event, base)
        if mask.columns.shape[1] != 1:
            raise QuantityError(
                f"stated[{event!r}]", "one yes or no a draw", f"shape {mask.shape}", "Name one."
            )
        labels.append(str(event))
        masks.append(mask.columns[:, 0])
        goals.append(_probability(probability, event))
        _refuse_one_sided(masks[-1], v, event)
    a, goal = np.stack(masks, axis=1), np.array(goals)
    t = _multipliers(a, log_base, goal, labels)
    exponent = a @ t
    log_mean = float(_core.log_sum_exp((exponent + log_base)[:, None])[0])
    return Statements(
        changed_by(base.draws.shaped(exponent)),
        ReadOnly(dict(zip(labels, goals, strict=True))),
        ReadOnly(dict(zip(labels, (v @ a).tolist(), strict=True))),
        ReadOnly(dict(zip(labels, t.tolist(), strict=True))),
        math.exp(float(np.ptp(exponent[v > 0]))),
        float(t @ goal) - log_mean,
    )


def _probability(value: Any, event: Any) -> float:
    number = isinstance(value, int | float | np.floating) and not isinstance(value, bool)
    if not number or not 0 < value < 1:
        raise ArgumentError(
            f"stated[{event!r}]",
            "a probability between 0 and 1",
            repr(value),
            "What is certain is another support: swap the prior.",
        )
    return float(value)


def _refuse_one_sided(mask: Array, v: Array, event: Any) -> None:
    inside = float(v @ mask)
    if mask[v > 0].all() or not mask[v > 0].any():
        side = "outside" if inside > 0.5 else "inside"
        raise QuantityError(
            f"stated[{event!r}]",
            "draws on both sides of the event",
            f"none {side}",
            "No weights can move mass to where no draw is: refit, or state another limit.",
        )


def _multipliers(a: Array, log_base: Array, goal: Array, labels: list[str]) -> Array:
    """
    Newton on the convex dual ``log E exp(Σ t_k 1_k) − Σ t_k p_k`` (Csiszár 1975).

    Statements that contradict each other leave it without a minimum: multipliers run away.
    """
    t = np.zeros(len(goal))

    def dual(t: Array) -> tuple[float, Array]:
        total = a @ t + log_base
        log_mean = float(_core.log_sum_exp(total[:, None])[0])
        return log_mean - float(t @ goal), np.exp(total - log_mean)

    value, w = dual(t)
    for _ in range(_STEPS):
        slope = w @ a - goal
        if float(np.abs(slope).max()) < 1e-12:
            return t
        centred = a - w @ a
        curvature = (centred * w[:, None]).T @ centred
        # A statement that follows from the others makes this singular; any solution will do.
        move = -np.linalg.lstsq(curvature, slope, rcond=1e-10)[0]
        size = 1.0
        while size > 1e-10:
            after, weights = dual(t + size * move)
            # At the solution the decrease is below the rounding of the value.
            rounding = 1e-14 * max(1.0, abs(value))
            if after <= value + 1e-4 * size * float(slope @ move) + rounding:
                break
            size /= 2
        if size <= 1e-10 or float(np.abs(t + size * move).max()) > _LARGEST:
            break
        t, value, w = t + size * move, after, weights
    if float(np.abs(w @ a - goal).max()) < 1e-9:
        return t
    raise ArgumentError(
        "stated",
        "statements that some weights of these draws meet together",
        "; ".join(f"P({k}) = {p:g}" for k, p in zip(labels, goal, strict=True)),
        "They contradict each other, or no draw lies where they need mass: state fewer.",
    )
