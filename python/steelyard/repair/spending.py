"""What a repair may cost, and what it has cost."""

from __future__ import annotations

import math
import sys
import time
from collections.abc import Callable
from dataclasses import dataclass, field
from typing import Any

import numpy as np

from steelyard.errors import ArgumentError, ArgumentTypeError
from steelyard.repair.evaluating import Spent

__all__ = ["Purse", "read_purse"]


@dataclass(eq=False)
class Purse:
    """
    Limits in evaluations and seconds over all rungs, and who is told of the progress.

    Attributes
    ----------
    spent : Spent
        The counter that all evaluators share.
    most_points, most_seconds : float
        Limits; infinite where there are none.
    """

    spent: Spent
    most_points: float = math.inf
    most_seconds: float = math.inf
    progress: Callable[[str, int], None] | None = None
    rung: str = ""
    is_empty: bool = False
    began: float = field(default_factory=time.monotonic)

    @property
    def seconds(self) -> float:
        """Seconds since the repair began."""
        return time.monotonic() - self.began

    @property
    def left(self) -> float:
        """Evaluations that may still be spent."""
        return max(self.most_points - self.spent.points, 0)

    def allows(self, points: int) -> bool:
        """Whether so many more points may be evaluated; remembered where they may not."""
        fine = points <= self.left and self.seconds < self.most_seconds
        self.is_empty |= not fine
        return fine

    def tell(self) -> None:
        """Tell how much has been spent."""
        if self.progress is not None:
            self.progress(self.rung, self.spent.points)


def read_purse(most_evaluations: Any, most_seconds: Any, progress: Any) -> Purse:
    """Limits and progress as the user states them."""
    return Purse(
        Spent(),
        _limit(most_evaluations, "most_evaluations", "points"),
        _limit(most_seconds, "most_seconds", "seconds"),
        _teller(progress),
    )


def _limit(value: Any, argument: str, unit: str) -> float:
    if value is None:
        return math.inf
    if isinstance(value, bool) or not isinstance(value, int | float | np.integer | np.floating):
        raise ArgumentTypeError(
            argument, f"a number of {unit}, or None", repr(value), "Say how many."
        )
    if not value > 0:
        raise ArgumentError(
            argument, "a positive number", f"{value:g}", "Leave it out for no limit."
        )
    return float(value)


def _teller(progress: Any) -> Callable[[str, int], None] | None:
    if progress is None or progress is False:
        return None
    if progress is True:

        def write(rung: str, points: int) -> None:
            sys.stderr.write(f"\r{rung}: {points:,} points evaluated")
            sys.stderr.flush()

        return write
    if callable(progress):
        return lambda rung, points: progress(points, rung)
    raise ArgumentTypeError(
        "progress",
        "True, or a callable of (points, rung)",
        repr(progress),
        "Leave it out for none.",
    )
