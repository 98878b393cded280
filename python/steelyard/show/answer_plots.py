"""Plots of an answer: how the weight is shared, and base against target marginals."""

from __future__ import annotations

from dataclasses import dataclass
from typing import TYPE_CHECKING, Any

import numpy as np

from steelyard.answers.quantities import read_quantity
from steelyard.digits import short
from steelyard.errors import QuantityError
from steelyard.show.style import BASE, GUIDE, INK, TARGET, axes

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
        ax.text(size, 0.03, f" effective size {short(round(size))}", color=INK, fontsize=9)
        ax.set_xscale("log")
        ax.set_xlim(1, len(w))
        ax.set_ylim(0, 1.02)
        ax.set_xlabel("heaviest draws, counted from the heaviest")
        ax.set_ylabel("share of all weight they hold")
        ax.set_title(
            f"{self.answer.verdict.level}: heaviest draw holds {short(w[0])}",
            loc="left",
            fontsize=10,
            color=INK,
        )
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
        read = read_quantity(quantity, answer._base)
        if read.columns.shape[1] != 1:
            raise QuantityError(
                "quantity",
                "a single number for each draw",
                f"shape {read.shape}",
                'Name one element, such as "rate[3]".',
            )
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
        ax.set_title(str(mean), loc="left", fontsize=10, color=INK)
        ax.legend(frameon=False, loc="lower right")
        return ax
