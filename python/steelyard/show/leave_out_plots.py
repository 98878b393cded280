"""Plots of leaving out: where trust is thin, what drives a conclusion, calibration, differences."""

from __future__ import annotations

from dataclasses import dataclass
from typing import TYPE_CHECKING, Any

import numpy as np
import numpy.typing as npt

from steelyard.digits import short
from steelyard.rules import RULES
from steelyard.show.style import BASE, GUIDE, INK, TARGET, axes, title

if TYPE_CHECKING:
    from steelyard.leaving_out import Calibration, Contrast, LeaveOut, LookAhead

__all__ = ["CalibrationPlots", "ContrastPlots", "LeaveOutPlots", "LookAheadPlots"]

# Groups that get their names written beside them.
_NAMED = 6
# From so many groups on the first ones get more room.
_CROWDED = 24


@dataclass(frozen=True, eq=False)
class LeaveOutPlots:
    """
    Plots of leaving out; calling it draws the default one.

    Every plot takes ``ax=``, returns the Axes and never shows.
    """

    left: LeaveOut

    def __call__(self, *, ax: Any = None) -> Any:
        """
        Where trust is thin.

        Each group stands by what its own data add to its score (in-sample minus left-out) and by
        how many draws its weights are worth. Groups below sound are drawn large, and the worst are
        named.

        Parameters
        ----------
        ax : matplotlib.axes.Axes, optional
            Where to draw.

        Returns
        -------
        matplotlib.axes.Axes
            The axes drawn on.
        """
        left = self.left
        ax = axes(ax)
        gap = (left.in_sample - left.by_group.value).reshape(-1)
        size = left.effective_size.reshape(-1)
        levels = np.asarray(left.by_group.verdict.level).reshape(-1)
        sound = np.asarray(levels == "sound")
        ax.plot(gap[sound], size[sound], "o", ms=3.5, mfc="none", mec=BASE, label="sound")
        for name, mark in (("strained", "D"), ("refit", "s")):
            rows = np.asarray(levels == name)
            if rows.any():
                filled = TARGET if name == "refit" else "none"
                ax.plot(gap[rows], size[rows], mark, ms=7, mfc=filled, mec=TARGET, label=name)
        worst = np.argsort(size, kind="stable")[:_NAMED]
        for row in worst[(size[worst] < np.median(size) / 2) | ~sound[worst]]:
            _named(ax, gap[row], size[row], left.name_of(int(row)))
        ax.axhline(RULES["few_effective"].strained, color=GUIDE, lw=0.8, zorder=0)
        ax.set_yscale("log")
        ax.set_xlabel("log score that a group owes to its own data")
        ax.set_ylabel("draws its weights are worth")
        total = left.log_score
        title(ax, f"{total} ")
        ax.legend(frameon=False, loc="upper right", fontsize=8)
        return ax

    def drivers(self, quantity: Any, *, ax: Any = None) -> Any:
        """
        What drives a conclusion: running sums of the groups' shifts, largest first.

        One curve adds up the groups whose absence raises the quantity, the other those whose
        absence lowers it. A curve that rises at once says that a few groups carry the conclusion.

        Parameters
        ----------
        quantity : str, array_like or callable
            A single number for each draw, or an event.
        ax : matplotlib.axes.Axes, optional
            Where to draw.

        Returns
        -------
        matplotlib.axes.Axes
            The axes drawn on.
        """
        found = self.left.influence(quantity)
        shift = np.nan_to_num(found.value[..., 0].reshape(-1))
        ax = axes(ax)
        for sign, colour, word in ((1.0, TARGET, "raises"), (-1.0, INK, "lowers")):
            rows = np.argsort(-sign * shift, kind="stable")
            rows = rows[sign * shift[rows] > 0]
            if not len(rows):
                continue
            running = _running(ax, shift[rows], colour)
            for place, row in enumerate(rows[:_NAMED], start=1):
                _named(ax, place, running[place - 1], self.left.name_of(int(row)), colour)
            ax.text(
                len(rows),
                running[-1],
                f" absence {word} it",
                color=colour,
                fontsize=8,
                va="center",
            )
        ax.axhline(0.0, color=GUIDE, lw=0.8, zorder=0)
        _count_axis(ax, len(shift))
        ax.set_xlabel("groups, from the one that moves it most")
        ax.set_ylabel("shifts added up (base sd)")
        name = found.labels["quantity"][0]
        title(ax, f"what drives {name}")
        return ax


@dataclass(frozen=True, eq=False)
class CalibrationPlots:
    """
    The plot of a calibration.

    It takes ``ax=``, returns the Axes and never shows.
    """

    calibration: Calibration

    def __call__(self, *, ax: Any = None) -> Any:
        """
        How many observations too many fell below each predicted quantile.

        A calibrated model stays inside the leaf; above it, too many fell below.

        Parameters
        ----------
        ax : matplotlib.axes.Axes, optional
            Where to draw.

        Returns
        -------
        matplotlib.axes.Axes
            The axes drawn on.
        """
        c = self.calibration
        ax = axes(ax)
        count = c.transform.size
        ends = np.concatenate([[0.0], c.grid, [1.0]])

        def excess(share: npt.NDArray[np.float64]) -> npt.NDArray[np.float64]:
            return np.concatenate([[0.0], count * (share - c.grid), [0.0]])

        ax.fill_between(ends, excess(c.lower), excess(c.upper), color=GUIDE, lw=0, alpha=0.7)
        ax.axhline(0.0, color=BASE, lw=0.8)
        ax.plot(ends, excess(c.share), color=TARGET if not c.is_inside else INK, lw=1.8)
        ax.set_xlim(0, 1)
        ax.set_xlabel("predicted quantile, the observation left out")
        ax.set_ylabel("observations too many below it")
        title(ax, c.sentence.split(":")[0])
        return ax


@dataclass(frozen=True, eq=False)
class ContrastPlots:
    """
    The plot of a contrast.

    It takes ``ax=``, returns the Axes and never shows.
    """

    contrast: Contrast

    def __call__(self, *, ax: Any = None) -> Any:
        """
        Where two models differ: paired differences added up, largest first.

        The curve ends at the whole difference. Where it gets there in a few steps, a few groups
        decide; where it wanders off and back, the models win and lose in turn.

        Parameters
        ----------
        ax : matplotlib.axes.Axes, optional
            Where to draw.

        Returns
        -------
        matplotlib.axes.Axes
            The axes drawn on.
        """
        c = self.contrast
        ax = axes(ax)
        gaps = c.by_group.reshape(-1)
        rows = np.argsort(-np.abs(gaps), kind="stable")
        whole = float(gaps.sum())
        ax.axhspan(whole - c.error, whole + c.error, color=GUIDE, lw=0, alpha=0.6)
        ax.axhline(0.0, color=BASE, lw=0.8)
        running = _running(ax, gaps[rows], TARGET)
        for place, row in enumerate(rows[:_NAMED], start=1):
            name = c.names[int(row)] if c.names else str(int(row))
            _named(ax, place, running[place - 1], name)
        _count_axis(ax, len(gaps))
        ax.text(
            len(gaps),
            whole,
            f"{short(float(f'{whole:.3g}'))} ± {short(float(f'{c.error:.2g}'))} ",
            color=INK,
            fontsize=9,
            ha="right",
            va="bottom",
        )
        ax.set_xlabel("groups, from the one on which the models differ most")
        ax.set_ylabel("differences in log score added up")
        title(ax, c.sentence.split(":")[0])
        return ax


@dataclass(frozen=True, eq=False)
class LookAheadPlots:
    """
    The plot of a look-ahead.

    It takes ``ax=``, returns the Axes and never shows.
    """

    ahead: LookAhead

    def __call__(self, *, ax: Any = None) -> Any:
        """
        How long each fit carries: draws that its weights are worth as data are added.

        Parameters
        ----------
        ax : matplotlib.axes.Axes, optional
            Where to draw.

        Returns
        -------
        matplotlib.axes.Axes
            The axes drawn on.
        """
        ahead = self.ahead
        ax = axes(ax)
        point = ahead.by_point.labels["point"]
        size = ahead.effective_size
        ax.plot(point, size, color=INK, lw=1.6)
        for due in ahead.refit_due:
            ax.axvline(due, color=TARGET, lw=1.0)
            ax.text(due, size.max(), f" refit at {due}", color=TARGET, fontsize=8, va="top")
        ax.axhline(RULES["few_effective"].refit, color=GUIDE, lw=0.8, zorder=0)
        ax.set_yscale("log")
        ax.set_xlabel("position in the series")
        ax.set_ylabel("draws the weights are worth")
        title(ax, ahead.sentence)
        return ax


def _running(ax: Any, steps: npt.NDArray[np.float64], colour: str) -> npt.NDArray[np.float64]:
    """Draw the running sum of steps, and give it back."""
    running = np.cumsum(steps)
    place = np.arange(1, len(running) + 1)
    ax.step(place, running, where="mid", color=colour, lw=1.8)
    if len(running) <= _CROWDED:
        ax.plot(place, running, ".", color=colour, ms=4)
    return running


def _count_axis(ax: Any, count: int) -> None:
    """Counts from one; with many groups the first few get the room."""
    if count > _CROWDED:
        ax.set_xscale("log")
        ax.set_xlim(0.8, count * 2)
    else:
        ax.set_xlim(0.3, count + 1.5)


def _named(ax: Any, x: float, y: float, name: str, colour: str = INK) -> None:
    ax.annotate(
        name,
        (x, y),
        xytext=(4, 3),
        textcoords="offset points",
        fontsize=8,
        color=colour,
    )
