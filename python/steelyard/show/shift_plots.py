"""Plots of plans and attributions: shifts, lined up one below the other."""

from __future__ import annotations

from dataclasses import dataclass
from typing import TYPE_CHECKING, Any

import numpy as np

from steelyard.errors import ArgumentError, UnknownNameError
from steelyard.show.style import BASE, GUIDE, INK, TARGET, axes, line_names, title

if TYPE_CHECKING:
    from steelyard.answers.attribution import Attribution
    from steelyard.planning import Triage

__all__ = ["AttributionPlots", "TriagePlots"]


@dataclass(frozen=True, eq=False)
class TriagePlots:
    """The shifts of a plan; calling it draws them."""

    triage: Triage

    def __call__(self, quantity: str | None = None, *, ax: Any = None) -> Any:
        """
        Shift of one quantity under every scenario, with the simultaneous band.

        Filled marks are sound, hollow ones are not; scenarios that failed keep their line.

        Parameters
        ----------
        quantity : str, optional
            Label of the quantity; by default the deciding event, or the only one.
        ax : matplotlib.axes.Axes, optional
            Where to draw.

        Returns
        -------
        matplotlib.axes.Axes
            The axes drawn on.

        Raises
        ------
        UnknownNameError, ArgumentError
            For a label that was not asked, or a quantity with several elements.
        """
        found = self.triage
        label = quantity or found.decision or next(iter(found.shift))
        if label not in found.shift:
            raise UnknownNameError(
                "quantity", f"one of {', '.join(found.shift)}", repr(label), "Name one."
            )
        estimate = found.shift[label]
        if np.ndim(estimate.value) != 1:
            raise ArgumentError(
                "quantity", "a single number", "one with several elements", 'Ask for "rate[3]".'
            )
        ax = axes(ax)
        scenarios = found.plan.scenarios
        ax.axvline(0, color=INK, lw=0.8)
        for line, scenario in enumerate(scenarios):
            ax.axhline(line, color=GUIDE, lw=0.6, zorder=0)
            if scenario.name in found.failed:
                ax.text(0, line, " failed", va="center", fontsize=8, color=INK)
                continue
            place = found.names.index(scenario.name)
            value, error = float(estimate.value[place]), float(estimate.error[place])
            sound = estimate.verdict[place].is_sound
            half = found.critical * error
            colour = TARGET if sound else BASE
            ax.plot([value - half, value + half], [line] * 2, color=colour, lw=3, alpha=0.6)
            ax.plot(value, line, "o", ms=6, color=colour, mfc=colour if sound else "white")
        line_names(ax, [s.name + (" (later)" if s.later else "") for s in scenarios])
        ax.tick_params(axis="y", length=0)
        ax.set_xlabel(f"shift of {label}; bands hold together, 95 %")
        title(ax, "filled: sound; hollow: not")
        return ax


@dataclass(frozen=True, eq=False)
class AttributionPlots:
    """Contributions to a shift; calling it draws them as steps from base to target."""

    attribution: Attribution

    def __call__(self, *, ax: Any = None) -> Any:
        """
        Contributions one after the other, ending at the shift.

        Parameters
        ----------
        ax : matplotlib.axes.Axes, optional
            Where to draw.

        Returns
        -------
        matplotlib.axes.Axes
            The axes drawn on.

        Raises
        ------
        ArgumentError
            For a quantity with several elements.
        """
        found = self.attribution
        if np.ndim(found.shift.value):
            raise ArgumentError(
                "quantity", "a single number", "one with several elements", 'Ask for "rate[3]".'
            )
        ax = axes(ax)
        at = 0.0
        ax.axvline(0, color=INK, lw=0.8)
        for line, estimate in enumerate(found.terms.values()):
            value, error = float(estimate.value), float(estimate.error)
            ax.barh(line, value, left=at, height=0.55, color=TARGET, alpha=0.75)
            at += value
            ax.plot([at - error, at + error], [line] * 2, color=INK, lw=1.2)
            ax.plot([at, at], [line, line + 1], color=BASE, lw=0.8)
        last = len(found.terms)
        total, error = float(found.shift.value), float(found.shift.error)
        ax.barh(last, total, height=0.55, color=BASE)
        ax.plot([total - error, total + error], [last] * 2, color=INK, lw=1.2)
        ax.set_yticks(range(last + 1), [*found.terms, "shift"])
        ax.set_ylim(last + 0.6, -0.6)
        ax.tick_params(axis="y", length=0)
        ax.set_xlabel(f"shift of {found.shift.label}")
        return ax
