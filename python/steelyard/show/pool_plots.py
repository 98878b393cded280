"""Plots of a pool: what fits share, and their constants."""

from __future__ import annotations

from dataclasses import dataclass
from typing import TYPE_CHECKING, Any

import numpy as np

from steelyard.show.style import BASE, GUIDE, INK, TARGET, axes, line_names

if TYPE_CHECKING:
    from steelyard.repair.pooled import Pooled

__all__ = ["PoolPlots"]

# Shades of the fits, from ink to sand and back, so that neighbours differ.
_SHADES = (INK, TARGET, BASE, "#5f7470", "#c9a66b", "#7a4b2a", "#8fa3a8", "#3d5a5b")


@dataclass(frozen=True, eq=False)
class PoolPlots:
    """What the fits of a pool share; calling it draws that."""

    pool: Pooled

    def __call__(self, *, ax: Any = None) -> Any:
        """
        Where the mass of each fit lies: one bar a fit, divided among those that make draws there.

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
        labels, mass = self.pool.labels, np.asarray(self.pool.shared_mass)
        left = np.zeros(len(labels))
        for column, label in enumerate(labels):
            shade = _SHADES[column % len(_SHADES)]
            ax.barh(range(len(labels)), mass[:, column], left=left, color=shade, label=label)
            for line in range(len(labels)):
                if mass[line, column] > 0.08:
                    middle = left[line] + mass[line, column] / 2
                    text = f"{mass[line, column]:.2f}"
                    ax.text(middle, line, text, ha="center", va="center", fontsize=8, color="white")
            left += mass[:, column]
        line_names(ax, labels)
        ax.set_xlim(0, 1)
        ax.set_xlabel("share of a fit's mass where the draws of each fit lie")
        ax.legend(fontsize=8, frameon=False, loc="upper left", bbox_to_anchor=(1, 1))
        return ax

    def constants(self, *, level: float = 0.95, ax: Any = None) -> Any:
        """
        Log constants relative to the first fit, with their Monte Carlo intervals.

        Parameters
        ----------
        level : float
            Probability of the intervals.
        ax : matplotlib.axes.Axes, optional
            Where to draw.

        Returns
        -------
        matplotlib.axes.Axes
            The axes drawn on.
        """
        ax = axes(ax)
        found = self.pool.log_constants
        low, high = found.error_interval(level)
        ax.axvline(0, color=GUIDE, lw=0.8, zorder=0)
        for line in range(len(self.pool.labels)):
            ax.plot([low[line], high[line]], [line, line], color=TARGET, lw=3, alpha=0.6)
            ax.plot(found.value[line], line, "o", ms=5, color=INK)
        line_names(ax, self.pool.labels)
        ax.set_xlabel(f"log normalising constant against {self.pool.labels[0]}")
        return ax
