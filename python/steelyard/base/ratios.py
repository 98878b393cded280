"""The rules for log ratios: −inf is a weight of zero, NaN and +inf are errors."""

from __future__ import annotations

import math

import numpy as np

from steelyard import _core
from steelyard.base.draws import Array, Draws
from steelyard.errors import RatioError

__all__ = ["extremes_of", "refuse_bad_ratio"]


def extremes_of(values: Array) -> tuple[float, float]:
    """Smallest and largest entry of float64 values of any shape; both NaN if any entry is."""
    return _core.extremes(np.require(values, np.float64, ["C", "A"]).reshape(-1))


def refuse_bad_ratio(log_ratio: Array, draws: Draws, argument: str) -> None:
    """NaN and +inf are errors, and so is −inf everywhere."""
    if math.isfinite(extremes_of(log_ratio)[1]):
        return
    bad = np.isnan(log_ratio) | (log_ratio == np.inf)
    if bad.any():
        first = int(np.argmax(bad))
        raise RatioError(
            argument,
            "log ratios that are finite or −inf (a weight of zero)",
            f"{int(bad.sum())} of {len(log_ratio)} NaN or +inf, first {log_ratio[first]} at "
            f"{draws.where(first)}",
            "Look at target and base there: +inf says that the base cannot make that draw.",
        )
    if (log_ratio == -np.inf).all():
        raise RatioError(
            argument,
            "a draw with a finite log ratio",
            "−inf for every draw",
            "No draw lies in the target's support: refit, or mend the change.",
        )
