"""How large a reweighing a decision withstands, with no weights at all."""

from __future__ import annotations

from dataclasses import replace
from typing import Any

import numpy as np

from steelyard.answers.estimate import Estimate
from steelyard.answers.probabilities import probability_of
from steelyard.answers.quantities import Quantity, event_mask
from steelyard.answers.reweigh import base_answer
from steelyard.base import Base
from steelyard.errors import ArgumentError, ArgumentTypeError, QuantityError

__all__ = ["read_event", "read_level", "resistance"]


def read_level(level: Any) -> float:
    """A level in (0, 1)."""
    if isinstance(level, bool) or not isinstance(level, int | float | np.floating):
        raise ArgumentTypeError("level", "a number in (0, 1)", repr(level), "Write 0.8.")
    if not 0 < level < 1:
        raise ArgumentError("level", "a probability between 0 and 1", f"{level!r}", "Write 0.8.")
    return float(level)


def read_event(event: Any, base: Base, verb: str) -> Quantity:
    """An event that is one yes or no a draw, and that is both at some draws."""
    mask = event_mask(event, base)
    if mask.columns.shape[1] != 1:
        raise QuantityError(
            "event", "one yes or no a draw", f"shape {mask.shape}", 'Name one: "rate[3] > 0.12".'
        )
    inside = int(mask.columns.sum())
    if inside in (0, base.draws.size):
        raise QuantityError(
            "event",
            "an event that some draws lie in and some do not",
            "none in it" if inside == 0 else "all in it",
            f"{verb} needs draws on both sides: ask for a less extreme event, or bring more draws.",
        )
    return mask


def resistance(base: Base, event: Any, level: float) -> Estimate:
    """
    Resistance ratio of a decision; see ``Fit.resistance``.

    ``R* = odds(P)/odds(level)``, or its inverse where P is below the level; error by the delta
    method, ``R* error(P) / (P (1 − P))``.
    """
    level = read_level(level)
    mask = read_event(event, base, "A resistance ratio")
    scale = base_answer(base)._scale
    found = probability_of(scale, mask, level, 1.0)
    p, error = float(np.ravel(found.value)[0]), float(np.ravel(found.error)[0])
    if not 0 < p < 1:
        raise QuantityError(
            "event", "draws with weight on both sides", f"probability {p:g}", "Bring more draws."
        )
    ratio = p / (1 - p) / (level / (1 - level))
    held = max(ratio, 1 / ratio)
    return replace(
        found,
        value=held,
        error=held * error / (p * (1 - p)),
        label=f"resistance of {mask.label} at {level:g}",
    )
