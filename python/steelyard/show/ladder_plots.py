"""Plots of a repair's ladder: what each rung cost, and what it gave."""

from __future__ import annotations

import math
from dataclasses import dataclass
from typing import TYPE_CHECKING, Any

from steelyard.digits import short
from steelyard.show.style import BASE, GUIDE, INK, TARGET, axes, title

if TYPE_CHECKING:
    from steelyard.repair import Ladder, Rung

__all__ = ["LadderPlots"]


@dataclass(frozen=True, eq=False)
class LadderPlots:
    """
    Plots of a ladder; calling it draws the default one.

    Every plot takes ``ax=``, returns the Axes and never shows.
    """

    ladder: Ladder

    def __call__(self, *, ax: Any = None) -> Any:
        """
        What each rung cost and gave, the first one at the foot.

        A rung is as long as the points that it evaluated, and says its effective size and level;
        the one that answered is dark.

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
        rungs = self.ladder.rungs
        for height, rung in enumerate(rungs):
            chosen = rung.name == self.ladder.chosen
            ax.barh(height, rung.evaluations, height=0.36, color=TARGET if chosen else BASE)
            ax.text(
                rung.evaluations, height, f"  {_said(rung)}", color=INK, fontsize=9, va="center"
            )
        ax.set_yticks(range(len(rungs)), [rung.name for rung in rungs])
        ax.set_ylim(-0.6, len(rungs) - 0.4)
        # Room for the words beside the longest rung.
        ax.set_xlim(0, 1.9 * max([rung.evaluations for rung in rungs] + [1]))
        ax.xaxis.grid(visible=True, color=GUIDE, lw=0.6)
        ax.set_axisbelow(True)
        ax.set_xlabel("points at which the densities were evaluated")
        title(
            ax,
            f"answered by {self.ladder.chosen} after {self.ladder.evaluations:,} evaluations, "
            f"{short(float(f'{self.ladder.seconds:.2g}'))} s",
        )
        return ax


def _said(rung: Rung) -> str:
    if math.isnan(rung.effective_size):
        return "no answer"
    return f"{rung.level}, effective size {short(round(rung.effective_size))}"
