"""How many draws an error asks for, and what a refit is worth to a decision."""

from __future__ import annotations

import math
from dataclasses import dataclass
from html import escape
from typing import Any

import numpy as np

from steelyard import _core
from steelyard.answers.answer import Answer
from steelyard.answers.estimate import Estimate
from steelyard.answers.reweigh import base_answer, reweigh
from steelyard.arrays import Frozen
from steelyard.base import Base
from steelyard.base.draws import Array
from steelyard.changes import Change
from steelyard.digits import chance, short
from steelyard.errors import ArgumentError, ArgumentTypeError, QuantityError
from steelyard.sensitivity.resistance import read_level
from steelyard.verdicts import Verdict

__all__ = ["MoreDraws", "RefitValue", "more_draws", "value_of_refit"]


@dataclass(frozen=True, eq=False)
class MoreDraws(Frozen):
    """
    How many draws an error asks for.

    Attributes
    ----------
    draws : float or numpy.ndarray
        Draws in all, as good as those at hand; +inf where no number will do.
    at_hand : int
        Draws there are.
    error, wanted : float or numpy.ndarray
        Monte Carlo error now, and the one asked for.
    exponent : float or numpy.ndarray
        The error falls like draws to the minus this power: one half, less for heavy tails.
    verdict : Verdict
        Of the estimate that this rests on.
    label : str
        What is estimated.
    """

    draws: Any
    at_hand: int
    error: Any
    wanted: float
    exponent: Any
    verdict: Verdict
    label: str = ""

    def __str__(self) -> str:
        most = float(np.max(self.draws))
        if math.isinf(most):
            return (
                f"{self.label}: no number of such draws brings the error to {short(self.wanted)}; "
                "refit under the change"
            )
        factor = most / self.at_hand
        if factor <= 1:
            return f"{self.label}: the {self.at_hand} draws at hand are enough"
        power = float(np.min(self.exponent))
        return (
            f"{self.label}: {short(most)} draws in all, {short(factor)} times those at hand "
            f"(the error falls like draws to the power −{short(power)})"
        )

    def __repr__(self) -> str:
        return f"<MoreDraws {self}>"

    def _repr_html_(self) -> str:
        return f"<p>{escape(str(self))}</p>"


def more_draws(
    base: Base, quantity: Any, error: Any, *, change: Change | None = None, of: str = "mean"
) -> MoreDraws:
    """Draws for an error; see ``Fit.more_draws``."""
    if isinstance(error, bool) or not isinstance(error, int | float | np.number):
        raise ArgumentTypeError("error", "a number", repr(error), "State a Monte Carlo error.")
    if not 0 < error < math.inf:
        raise ArgumentError("error", "a positive number", f"{error!r}", "State an error.")
    if of not in ("mean", "sd", "prob"):
        raise ArgumentError("of", "'mean', 'sd' or 'prob'", repr(of), "Choose one of them.")
    answer = base_answer(base) if change is None else reweigh(base, change)
    found = getattr(answer, of)(quantity)
    if not isinstance(found, Estimate):
        raise QuantityError("quantity", "one quantity", f"{len(found)}", "Ask for each by itself.")
    now, shape = np.asarray(found.error), np.asarray(found.tail_shape)
    # Beyond one half the variance is infinite: sums of S terms grow like S to the power k.
    exponent = 1 - np.clip(np.where(np.isnan(shape), 0.0, shape), 0.5, 1.0)
    with np.errstate(divide="ignore", over="ignore"):
        factor = np.where(
            now <= error, 1.0, np.where(exponent > 0, (now / error) ** (1 / exponent), math.inf)
        )
    factor = np.where(np.isfinite(now), factor, math.inf)
    draws = np.ceil(factor * base.draws.size)
    shaped = (lambda v: v) if draws.ndim else float
    return MoreDraws(
        shaped(draws),
        base.draws.size,
        found.error,
        float(error),
        shaped(exponent),
        found.verdict,
        found.label,
    )


@dataclass(frozen=True, eq=False)
class RefitValue(Frozen):
    """
    What a refit is worth to a decision.

    Attributes
    ----------
    probability : Estimate
        Probability of the event under the change, from the draws at hand.
    level : float
        What it is held against.
    right_now, right_after : float
        Monte Carlo probability that the decision is on the right side: now, and as expected when
        a refit is pooled with what is known. NaN where no error can be relied on.
    value : float
        How much nearer to the level's right side the decision lies on average after the refit, in
        units of probability: zero where no Monte Carlo error could change it.
    perfect : float
        The same for infinitely many draws.
    draws : int
        Independent draws that the refit is taken to give.
    """

    probability: Estimate
    level: float
    right_now: float
    right_after: float
    value: float
    perfect: float
    draws: int

    @property
    def verdict(self) -> Verdict:
        """Of the probability: without a sound one the value of a refit is not known."""
        return self.probability.verdict

    def __str__(self) -> str:
        if math.isnan(self.right_now):
            return (
                "how surely the decision is right is not known: these draws cannot say how wrong "
                "they may be, and only a refit can"
            )
        return (
            f"right with Monte Carlo probability {chance(self.right_now)} now, "
            f"{chance(self.right_after)} expected after a refit of {self.draws} draws; "
            f"worth {short(self.value)} of probability, at most {short(self.perfect)}"
        )

    def __repr__(self) -> str:
        return f"<RefitValue {self}>"

    def _repr_html_(self) -> str:
        return f"<p>{escape(str(self))}</p>"


def value_of_refit(
    base: Base, change: Change, event: Any, level: Any, *, draws: Any = None
) -> RefitValue:
    """Value of a refit for a decision; see ``Fit.value_of_refit``."""
    level = read_level(level)
    count = base.draws.size if draws is None else draws
    if isinstance(count, bool) or not isinstance(count, int | np.integer) or count < 1:
        raise ArgumentError("draws", "a whole number from 1 on", repr(draws), "Say how many.")
    answer: Answer = reweigh(base, change)
    found = answer.prob(event, level=level)
    if not isinstance(found, Estimate) or np.ndim(found.value):
        raise QuantityError("event", "one event", "several", 'Name one: "rate[3] > 0.12".')
    p, error = float(found.value), float(found.error)
    if not found.verdict.is_sound or not (math.isfinite(error) and 0 < p < 1):
        return RefitValue(found, level, *(math.nan,) * 4, int(count))
    distance = p - level
    fresh = math.sqrt(p * (1 - p) / count)
    if error == 0:
        return RefitValue(found, level, 1.0, 1.0, 0.0, 0.0, int(count))
    # Normal beliefs: known to `error`, a measurement of error `fresh` moves them by `step`.
    step = error**2 / math.hypot(error, fresh)
    left = error * fresh / math.hypot(error, fresh)
    x, w = np.polynomial.hermite_e.hermegauss(61)
    after = float(w @ _normal_cdf(np.abs(distance + step * x) / left) / w.sum())
    return RefitValue(
        found,
        level,
        float(_normal_cdf(np.array([abs(distance) / error]))[0]),
        after,
        _loss(distance, step),
        _loss(distance, error),
        int(count),
    )


def _normal_cdf(z: Array) -> Array:
    return np.asarray(_core.normal_cdf(np.ascontiguousarray(z)))


def _loss(distance: float, sd: float) -> float:
    """``E max(d, 0) − max(E d, 0)`` for normal d: what is gained by knowing d first."""
    u = abs(distance) / sd
    density = math.exp(-0.5 * u**2) / math.sqrt(2 * math.pi)
    beyond = float(_normal_cdf(np.array([-u]))[0])
    return max(sd * (density - u * beyond), 0.0)
