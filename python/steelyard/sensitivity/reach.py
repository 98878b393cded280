"""How much data against a decision it takes to flip it."""

from __future__ import annotations

import math
from dataclasses import dataclass
from html import escape
from typing import Any

import numpy as np

from steelyard.answers.quantities import read_quantity
from steelyard.arrays import Frozen
from steelyard.base import Base
from steelyard.changes import Change, log_ratio
from steelyard.digits import short
from steelyard.errors import ArgumentError, ArgumentTypeError, QuantityError
from steelyard.sensitivity.tipping import TippingPoint, tipping_point

__all__ = ["Reach", "least_data"]


@dataclass(frozen=True, eq=False)
class Reach(Frozen):
    """
    Smallest number of pseudo-observations that flips a decision.

    Attributes
    ----------
    status : {"flips", "holds", "unknown"}
        As of the tipping point.
    count : int or None
        Smallest whole number that flips it; None where it does not, or these draws cannot say.
    at_least : int or None
        Where unknown, the number up to which the decision is known to hold.
    tipping : TippingPoint
        The search in the number of pseudo-observations, fractions included.
    """

    status: str
    count: int | None
    at_least: int | None
    tipping: TippingPoint

    def __str__(self) -> str:
        if self.count is not None:
            low, high = (short(v) for v in self.tipping.confidence_set[0])
            return f"{self.count} pseudo-observations flip the decision (95 % set {low} to {high})"
        if self.status == "holds":
            return f"the decision holds against {short(self.tipping.path[0][-1])} of them"
        return f"the decision holds against {self.at_least} of them; beyond, these draws cannot say"

    def __repr__(self) -> str:
        return f"<Reach {self}>"

    def _repr_html_(self) -> str:
        return f"<p>{escape(str(self))}</p>"


def least_data(
    base: Base, event: Any, level: float, contrary: Any, *, most: float = 100.0
) -> Reach:
    """Smallest number of pseudo-observations against a decision; see ``Fit.least_data``."""
    if isinstance(most, bool) or not isinstance(most, int | float | np.integer | np.floating):
        raise ArgumentTypeError("most", "a number", repr(most), "Say how far to look.")
    if not (math.isfinite(most) and most >= 1):
        raise ArgumentError("most", "a number from 1 on", f"{most:g}", "Say how far to look.")
    one = read_quantity(contrary, base, "contrary")
    if one.shape:
        raise QuantityError(
            "contrary",
            "the log density of one pseudo-observation, one number a draw",
            f"shape {one.shape}",
            "Sum it over its own axes.",
        )
    values = base.draws.shaped(one.columns[:, 0])

    def pseudo_observations(count: float) -> Change:
        return log_ratio(count * values)

    found = tipping_point(base, pseudo_observations, event, level, (0.0, float(most)), start=0.0)
    flips = found.status == "flips"
    return Reach(
        found.status,
        math.ceil(found.at - 1e-9) if flips else None,
        None if flips else math.floor(found.trusted_until[1]),
        found,
    )
