"""LookAhead: scores ahead of the data, and where refits are due."""

from __future__ import annotations

from dataclasses import dataclass
from html import escape
from typing import Any

from steelyard.answers import Estimate
from steelyard.arrays import Frozen
from steelyard.base.draws import Array
from steelyard.digits import rounded
from steelyard.table import Table
from steelyard.verdicts import Verdict

__all__ = ["LookAhead"]


@dataclass(frozen=True, eq=False)
class LookAhead(Frozen):
    """
    Scores of a series ahead of the data that each fit has seen.

    Attributes
    ----------
    by_point : Estimate
        Log density of the next `steps` observations given all before, for each point from the
        first one predicted; labelled with the positions.
    log_score : Estimate
        Their sum, with its Monte Carlo error.
    steps : int
        How many observations are predicted at a time.
    start : int
        Position of the first one predicted: the number of observations behind the fit.
    refit_due : tuple of int
        Positions at which the weights ask for a refit.
    refits_needed : int
        How many refits the whole look-ahead needs: counted where they were made, else a forecast.
    is_forecast : bool
        Whether that number is a forecast.
    effective_size : numpy.ndarray
        Of the weights at each point.
    """

    by_point: Estimate
    log_score: Estimate
    steps: int
    start: int
    refit_due: tuple[int, ...]
    refits_needed: int
    is_forecast: bool
    effective_size: Array

    @property
    def verdict(self) -> Verdict:
        """What may be said of the sum."""
        return self.log_score.verdict

    @property
    def sentence(self) -> str:
        """Where refits are due, in words."""
        count = len(self.by_point.value)
        if not self.refit_due:
            return f"One fit carries all {count} points ahead."
        due = ", ".join(str(point) for point in self.refit_due[:12])
        if not self.is_forecast:
            return f"Refits were made at {due}: {self.refits_needed} for {count} points ahead."
        return (
            f"A refit is due at {due}; at that pace the whole look-ahead needs about "
            f"{self.refits_needed}."
        )

    @property
    def plot(self) -> Any:
        """Draw how long each fit carries; takes ``ax=``."""
        from steelyard.show.leave_out_plots import LookAheadPlots

        return LookAheadPlots(self)

    def table(self) -> Table:
        """
        One row a point: position, log score, error, tail shape, effective size, level.

        Returns
        -------
        Table
            In the order of the series.
        """
        e = self.by_point
        columns = {
            "point": e.labels["point"].tolist(),
            "log_score": e.value.tolist(),
            "error": e.error.tolist(),
            "tail_shape": e.tail_shape.tolist(),
            "effective_size": self.effective_size.tolist(),
            "level": [str(level) for level in e.verdict.level],
        }
        return Table(columns, {"log_score": columns["error"], "error": columns["error"]})

    def __str__(self) -> str:
        total = self.log_score
        return (
            f"{self.steps} ahead: log score {rounded(total.value, total.error)} "
            f"± {rounded(total.error, total.error)} Monte Carlo ({total.verdict.level})\n"
            f"{self.sentence}"
        )

    def __repr__(self) -> str:
        return f"<LookAhead {self}>"

    def _repr_html_(self) -> str:
        return f"<pre>{escape(str(self))}</pre>"
