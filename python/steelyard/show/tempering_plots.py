"""The history of a tempered run."""

from __future__ import annotations

from dataclasses import dataclass
from typing import TYPE_CHECKING, Any

import numpy as np

from steelyard.digits import rounded
from steelyard.show.style import BASE, GUIDE, INK, TARGET, axes, title

if TYPE_CHECKING:
    from steelyard.repair import Tempered

__all__ = ["TemperingPlots"]

# Labels at the ends of lines are kept so far apart, as a share of the axis.
_APART = 0.06


@dataclass(frozen=True, eq=False)
class TemperingPlots:
    """
    Plots of a tempered run; calling it draws its history.

    Every plot takes ``ax=``, returns the Axes and never shows.
    """

    tempered: Tempered

    def __call__(self, *, ax: Any = None) -> Any:
        """
        Temperature, effective size, acceptance and jump distance, step by step.

        Parameters
        ----------
        ax : matplotlib.axes.Axes, optional
            Where to draw.

        Returns
        -------
        matplotlib.axes.Axes
            The axes drawn on.
        """
        ax, run = axes(ax), self.tempered
        steps = run.history
        at = np.arange(1, len(steps) + 1)
        risen = [step.temperature for step in steps]
        edges, held = np.arange(len(risen) + 1) + 0.5, [*risen, *risen[-1:]] or [0.0]
        ax.fill_between(edges, held, step="post", color=BASE, alpha=0.45, lw=0)
        size = len(run.points)
        lines = {
            "effective size": ([s.effective_size / size for s in steps], TARGET, "-"),
            "jump": ([min(s.jump, 1.0) for s in steps], INK, "-"),
            "acceptance": ([s.acceptance for s in steps], INK, (0, (2, 2))),
        }
        for values, colour, style in lines.values():
            ax.plot(at, values, color=colour, ls=style, lw=1.8, marker="o", ms=3)
        _name_ends(ax, {name: values[-1] for name, (values, _, _) in lines.items() if values})
        ax.axhline(1.0, color=GUIDE, lw=1, zorder=0)
        ax.set_xlim(0.5, max(len(steps), 1) + 0.5)
        ax.set_ylim(0, 1.04)
        ax.set_xlabel("step")
        ax.set_ylabel("share of the particles; temperature as ground")
        title(ax, _sentence(run))
        return ax


def _name_ends(ax: Any, ends: dict[str, float]) -> None:
    """Names beside the right ends of lines, moved apart where these meet."""
    place = -1.0
    for name, value in sorted(ends.items(), key=lambda item: item[1]):
        place = max(value, place + _APART)
        ax.annotate(
            name,
            (1.01, place / 1.04),
            xycoords="axes fraction",
            color=TARGET if name == "effective size" else INK,
            fontsize=9,
            va="center",
            annotation_clip=False,
        )


def _sentence(run: Tempered) -> str:
    constant = run.log_constant
    number = rounded(constant.value, constant.error)
    error = rounded(constant.error, constant.error)
    where = "" if run.finished else f"stopped at temperature {run.temperature:.3g}; "
    return f"{where}log constant {number} ± {error}; {run.evaluations:,} evaluations"
