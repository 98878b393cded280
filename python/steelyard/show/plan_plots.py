"""Plots of what refits bring, and of data that arrive."""

from __future__ import annotations

from dataclasses import dataclass
from typing import TYPE_CHECKING, Any

from steelyard.show.style import BASE, GUIDE, INK, TARGET, axes, line_names

if TYPE_CHECKING:
    from steelyard.planning.arrival import Arrival
    from steelyard.planning.refits import RefitPlan

__all__ = ["ArrivalPlots", "RefitPlots"]


@dataclass(frozen=True, eq=False)
class RefitPlots:
    """What each scenario gets from the base and from the pool; calling it draws that."""

    plan: RefitPlan

    def __call__(self, *, ax: Any = None) -> Any:
        """
        Efficiency of every scenario: an arrow from what the base gives to what the pool gives.

        Scenarios to be refitted have a square at the end, the others a round mark; hollow marks
        rest on predictions that are not sound.

        Parameters
        ----------
        ax : matplotlib.axes.Axes, optional
            Where to draw.

        Returns
        -------
        matplotlib.axes.Axes
            The axes drawn on.
        """
        ax = axes(ax)
        plan = self.plan
        ax.axvline(plan.wanted, color=TARGET, lw=1.2, ls=(0, (4, 2)))
        for line, name in enumerate(plan.names):
            ax.axhline(line, color=GUIDE, lw=0.6, zorder=0)
            before = float(plan.from_base.value[line])
            after = float(plan.efficiency.value[line])
            ax.plot([before, after], [line, line], color=BASE, lw=2)
            ax.plot(before, line, "|", ms=9, color=INK)
            sound = bool(plan.efficiency.verdict[line].is_sound)
            mark = "s" if name in plan.refits else "o"
            ax.plot(after, line, mark, ms=6, color=TARGET, mfc=TARGET if sound else "white")
        labels = [n + (" (out of reach)" if n in plan.out_of_reach else "") for n in plan.names]
        line_names(ax, labels)
        ax.set_xlim(0, 1.02)
        ax.set_xlabel("effective draws to one draw: from the base (bar), from the pool (mark)")
        return ax


@dataclass(frozen=True, eq=False)
class ArrivalPlots:
    """How the draws wear out as data arrive; calling it draws that."""

    arrival: Arrival

    def __call__(self, *, ax: Any = None) -> Any:
        """
        Effective size after each batch, on a log scale, with the limit at which a refit is due.

        Parameters
        ----------
        ax : matplotlib.axes.Axes, optional
            Where to draw.

        Returns
        -------
        matplotlib.axes.Axes
            The axes drawn on; a forecast continues the line in dashes.
        """
        ax = axes(ax)
        history = self.arrival.history
        sizes = [self.arrival.base_size, *(step.effective_size for step in history)]
        ax.plot(range(len(sizes)), sizes, color=INK, lw=1.4)
        for place, step in enumerate(history, start=1):
            sound = step.level == "sound"
            ax.plot(
                place,
                step.effective_size,
                "o",
                ms=6,
                color=TARGET,
                mfc=TARGET if sound else "white",
            )
        forecast = self.arrival.forecast()
        if len(forecast.sizes):
            ahead = range(len(sizes) - 1, len(sizes) + len(forecast.sizes))
            ax.plot(ahead, [sizes[-1], *forecast.sizes], color=INK, lw=1.2, ls=(0, (3, 3)))
        ax.axhline(forecast.limit, color=TARGET, lw=1.0, ls=(0, (4, 2)))
        ax.set_yscale("log")
        names = ["", *(step.name for step in history)]
        ax.set_xticks(range(len(names)), names, rotation=30, ha="right", fontsize=8)
        ax.set_ylabel("effective size of the draws")
        return ax
