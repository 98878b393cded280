"""Plots of an answer: how the weight is shared, and base against target marginals."""

from __future__ import annotations

from dataclasses import dataclass
from typing import TYPE_CHECKING, Any

import numpy as np
import numpy.typing as npt

from steelyard.answers.quantities import Quantity, read_quantity
from steelyard.digits import short
from steelyard.errors import QuantityError
from steelyard.rules import RULES
from steelyard.show.style import BASE, GUIDE, INK, TARGET, axes, title

if TYPE_CHECKING:
    from steelyard.answers import Answer

__all__ = ["AnswerPlots"]


@dataclass(frozen=True, eq=False)
class AnswerPlots:
    """
    Plots of an answer; calling it draws the default one.

    Every plot takes ``ax=``, returns the Axes and never shows.
    """

    answer: Answer

    def __call__(self, *, ax: Any = None) -> Any:
        """
        How the weight is shared among the draws.

        The draws are lined up from the heaviest; the curve says what share of all weight the
        heaviest so many hold. Equal weights rise late, along the right edge.

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
        w = np.sort(np.ravel(self.answer.weights))[::-1]
        held = np.cumsum(w)
        count = np.arange(1, len(w) + 1)
        ax.plot(count, np.minimum(count / len(w), 1), color=BASE, lw=1.2, ls=(0, (4, 3)))
        ax.plot(count, held, color=TARGET, lw=2)
        size = self.answer.effective_size
        ax.axvline(size, color=INK, lw=0.8)
        ax.text(
            size, 0.97, f"effective size {short(round(size))} ", color=INK, fontsize=9, ha="right"
        )
        ax.text(len(w) / 3, 0.14, "equal weights ", color=INK, fontsize=8, ha="right")
        ax.set_xscale("log")
        ax.set_xlim(1, len(w))
        ax.set_ylim(0, 1.02)
        ax.set_xlabel("heaviest draws, counted from the heaviest")
        ax.set_ylabel("share of all weight they hold")
        title(ax, f"{self.answer.verdict.level}: heaviest draw holds {short(w[0])}")
        return ax

    def marginal(self, quantity: Any, *, ax: Any = None) -> Any:
        """
        Distribution function of one quantity under base and target.

        Parameters
        ----------
        quantity : str, array_like or callable
            A single number for each draw.
        ax : matplotlib.axes.Axes, optional
            Where to draw.

        Returns
        -------
        matplotlib.axes.Axes
            The axes drawn on.

        Raises
        ------
        QuantityError
            For a quantity with several elements.
        """
        answer = self.answer
        read = _single(quantity, answer)
        ax = axes(ax)
        x = read.columns[:, 0]
        order = np.argsort(x, kind="stable")
        for weights, colour, width, label in (
            (answer._base_weights.linear, BASE, 4.0, "base"),
            (answer._weights.linear, TARGET, 1.8, "target"),
        ):
            held = np.cumsum(weights[order])
            ax.step(x[order], held, where="post", color=colour, lw=width, label=label)
        mean = answer.mean(quantity)
        ax.axvline(mean.value, color=GUIDE, lw=0.8, zorder=0)
        ax.set_ylim(0, 1)
        ax.set_xlabel(read.label)
        ax.set_ylabel("probability of no more")
        title(ax, str(mean))
        ax.legend(frameon=False, loc="lower right")
        return ax

    def reach(self, quantity: Any, *, ax: Any = None) -> Any:
        """
        How far into both tails of one quantity the answer reaches.

        For every value, how many effective draws lie at or beyond it, on the thinner side. Where
        the curve falls below the limits of the event rule, probabilities are strained or refit.

        Parameters
        ----------
        quantity : str, array_like or callable
            A single number for each draw.
        ax : matplotlib.axes.Axes, optional
            Where to draw.

        Returns
        -------
        matplotlib.axes.Axes
            The axes drawn on.

        Raises
        ------
        QuantityError
            For a quantity with several elements.
        """
        answer = self.answer
        read = _single(quantity, answer)
        ax = axes(ax)
        order = np.argsort(read.columns[:, 0], kind="stable")
        x = read.columns[order, 0]
        for weights, colour, width, label in (
            (answer._base_weights.linear, BASE, 4.0, "base"),
            (answer._weights.linear, TARGET, 1.8, "target"),
        ):
            w = weights[order]
            sides = [_effective_beyond(w), _effective_beyond(w[::-1])[::-1]]
            ax.plot(x, np.minimum(*sides), color=colour, lw=width, label=label)
        limits = RULES["event_draws"]
        for limit, word in ((limits.strained, "strained"), (limits.refit, "refit")):
            ax.axhline(limit, color=INK, lw=0.8, ls=(0, (1, 2)))
            ax.text(
                0.995,
                limit,
                f"{word} below",
                transform=ax.get_yaxis_transform(),
                color=INK,
                fontsize=8,
                ha="right",
                va="top",
            )
        ax.set_yscale("log")
        ax.set_ylim(bottom=0.9)
        ax.set_xlabel(read.label)
        ax.set_ylabel("effective draws at or beyond")
        title(ax, "how far the draws reach")
        # Above the axes: below stand the words of the rule, and curves fill the rest.
        ax.legend(frameon=False, loc="lower right", bbox_to_anchor=(1, 1), ncols=2, fontsize=8)
        return ax


def _single(quantity: Any, answer: Answer) -> Quantity:
    read = read_quantity(quantity, answer._base)
    if read.columns.shape[1] != 1:
        raise QuantityError(
            "quantity",
            "a single number for each draw",
            f"shape {read.shape}",
            'Name one element, such as "rate[3]".',
        )
    return read


def _effective_beyond(w: npt.NDArray[np.float64]) -> npt.NDArray[np.float64]:
    """``(Σ w)²/Σ w²`` over the first so many draws."""
    total, squares = np.cumsum(w), np.cumsum(w**2)
    return np.asarray(np.where(squares > 0, total**2 / np.where(squares > 0, squares, 1.0), 0.0))
