"""Plots of sweeps, tipping points and perturbed priors."""

from __future__ import annotations

from dataclasses import dataclass
from typing import TYPE_CHECKING, Any

import numpy as np

from steelyard.digits import rounded, short
from steelyard.errors import ArgumentError
from steelyard.show.style import BASE, GUIDE, INK, TARGET, axes, title

if TYPE_CHECKING:
    from steelyard.sensitivity import Perturbation, Sweep, TippingPoint

__all__ = ["PerturbationPlots", "SweepPlots", "TippingPlots"]

# Ground of the region in which the draws can be trusted, and of the rest.
GROUND = "#eef3ee"
_BANDS = 9


@dataclass(frozen=True, eq=False)
class SweepPlots:
    """
    Plots of a sweep; calling it draws a curve for one hyperparameter, a map for two.

    Every plot takes ``ax=``, returns the Axes and never shows.
    """

    sweep: Sweep

    def __call__(self, quantity: str | None = None, *, ax: Any = None) -> Any:
        """
        The default plot.

        Parameters
        ----------
        quantity : str, optional
            Label of the quantity; not needed where there is one. It is a single number.
        ax : matplotlib.axes.Axes, optional
            Where to draw.

        Returns
        -------
        matplotlib.axes.Axes
            The axes drawn on.

        Raises
        ------
        UnknownNameError, ArgumentError
            For a label that was not swept, or a quantity with several elements.
        """
        if np.ndim(self.sweep.one(quantity).value) != len(self.sweep.grid):
            raise ArgumentError(
                "quantity", "a single number", "one with several elements", 'Sweep "rate[3]" alone.'
            )
        return (self._curve if len(self.sweep.grid) == 1 else self._map)(quantity, axes(ax))

    def _curve(self, quantity: str | None, ax: Any) -> Any:
        ((name, at),) = self.sweep.grid.items()
        estimate, band = self.sweep.one(quantity), self.sweep.band(quantity)
        sound = np.asarray(estimate.verdict.is_sound)
        _ground(ax, at, sound)
        shown = np.isfinite(band).all(axis=0)
        ax.fill_between(at[shown], *band[:, shown], color=TARGET, alpha=0.22, lw=0)
        value = np.asarray(estimate.value)
        ax.plot(at, value, color=BASE, lw=1, ls=(0, (2, 2)))
        ax.plot(at, np.where(sound, value, np.nan), color=TARGET, lw=2)
        _limits(ax, value[sound] if sound.any() else value, band[:, sound & shown])
        if len(at) > 2 and at[0] > 0 and at[-1] / at[0] >= 30:
            ax.set_xscale("log")
        ax.set_xlim(at[0], at[-1])
        ax.set_xlabel(name)
        ax.set_ylabel(estimate.label)
        title(
            ax,
            f"{int(sound.sum())} of {sound.size} nodes sound; band holds the whole curve, 95 %",
        )
        return ax

    def _map(self, quantity: str | None, ax: Any) -> Any:
        (first, at), (second, other) = self.sweep.grid.items()
        estimate = self.sweep.one(quantity)
        value = np.asarray(estimate.value)
        sound = np.asarray(estimate.verdict.is_sound)
        kept = value[sound] if sound.any() else value
        levels = np.linspace(kept.min(), kept.max(), _BANDS + 2)[1:-1]
        ax.contourf(at, other, sound.T.astype(float), levels=[0.5, 1.5], colors=[GROUND])
        masked = np.where(sound, value, np.nan).T
        if np.ptp(kept) > 0:
            lines = ax.contour(at, other, masked, levels=levels, colors=TARGET, linewidths=1.4)
            ax.clabel(lines, fontsize=8, fmt=short)
        if not sound.all():
            ax.contour(at, other, sound.T.astype(float), levels=[0.5], colors=INK, linewidths=0.8)
            x, y = np.nonzero(~sound)
            ax.plot(at[x], other[y], ls="", marker=".", ms=2, color=BASE)
        ax.set_xlabel(first)
        ax.set_ylabel(second)
        title(ax, f"{estimate.label}: lines of equal value, drawn where sound")
        return ax


@dataclass(frozen=True, eq=False)
class TippingPlots:
    """The path of a decision; calling it draws it."""

    tipping: TippingPoint

    def __call__(self, *, ax: Any = None) -> Any:
        """
        Probability along the hyperparameter, its level, and where they meet.

        Parameters
        ----------
        ax : matplotlib.axes.Axes, optional
            Where to draw.

        Returns
        -------
        matplotlib.axes.Axes
            The axes drawn on.
        """
        ax, found = axes(ax), self.tipping
        at, value, error, sound = (np.asarray(part) for part in found.path)
        _ground(ax, at, (at >= found.trusted_until[0]) & (at <= found.trusted_until[1]) & sound)
        ax.axhline(found.level, color=INK, lw=0.8)
        ax.fill_between(
            at,
            value - 1.96 * error,
            value + 1.96 * error,
            where=sound,
            color=TARGET,
            alpha=0.22,
            lw=0,
        )
        ax.plot(at, value, color=BASE, lw=1, ls=(0, (2, 2)))
        ax.plot(at, np.where(sound, value, np.nan), color=TARGET, lw=2)
        for low, high in found.confidence_set:
            ends = np.clip([low, high], at[0], at[-1])
            ax.plot(ends, [found.level] * 2, color=INK, lw=4, solid_capstyle="butt", alpha=0.55)
        for crossing in found.crossings:
            ax.plot(crossing.at, found.level, marker="D", ms=6, color=INK)
        ax.plot(
            found.start, np.interp(found.start, at, value), marker="o", ms=6, mfc="white", color=INK
        )
        if at[0] > 0 and at[-1] / at[0] >= 10:
            ax.set_xscale("log")
        ax.set_xlim(at[0], at[-1])
        _limits(ax, np.append(value[sound], found.level), np.empty((2, 0)))
        ax.set_xlabel(found.name)
        ax.set_ylabel(f"P({found.event})")
        title(ax, _sentence(found))
        return ax


@dataclass(frozen=True, eq=False)
class PerturbationPlots:
    """The implied prior of a perturbation; calling it draws it beside the stated one."""

    perturbation: Perturbation

    def __call__(self, *, ax: Any = None) -> Any:
        """
        Stated and implied prior density.

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
            For a perturbation of the posterior, which has no prior to show.
        """
        shape = self.perturbation.prior
        if shape is None:
            raise ArgumentError(
                "perturbation", "one of a prior", "one of the posterior", "Pass prior_of=…."
            )
        ax = axes(ax)
        ax.fill_between(shape.values, shape.stated, color=BASE, alpha=0.45, lw=0)
        ax.plot(shape.values, shape.implied, color=TARGET, lw=2)
        peak = int(np.argmax(shape.implied))
        ax.annotate(
            "implied",
            (shape.values[peak], shape.implied[peak]),
            color=TARGET,
            fontsize=9,
            xytext=(6, 2),
            textcoords="offset points",
        )
        middle = int(np.searchsorted(np.cumsum(shape.stated), 0.8 * shape.stated.sum()))
        ax.annotate(
            "stated",
            (shape.values[middle], shape.stated[middle]),
            color=INK,
            fontsize=9,
            xytext=(6, 2),
            textcoords="offset points",
        )
        ax.set_ylim(bottom=0)
        ax.set_xlim(shape.values[0], shape.values[-1])
        ax.set_xlabel(shape.parameter)
        ax.set_ylabel("prior density")
        divergence = self.perturbation.divergence
        title(
            ax,
            f"least prior with {self.perturbation.quantity} at {self.perturbation.target:g}: "
            f"divergence {short(float(divergence.value))} ({divergence.verdict.level})",
        )
        return ax


def _ground(ax: Any, at: Any, trusted: Any) -> None:
    """Ground under the trusted stretches, reaching half-way to the next node."""
    middles = np.concatenate([[at[0]], (at[1:] + at[:-1]) / 2, [at[-1]]])
    for i in np.flatnonzero(trusted):
        ax.axvspan(middles[i], middles[i + 1], color=GROUND, lw=0, zorder=0)
    for i in np.flatnonzero(trusted[1:] != trusted[:-1]):
        ax.axvline(middles[i + 1], color=GUIDE, lw=1.2, zorder=1)


def _limits(ax: Any, values: Any, band: Any) -> None:
    """Limits by what is trusted, so that wild values beyond do not flatten it."""
    every = np.concatenate([np.ravel(values), np.ravel(band)])
    every = every[np.isfinite(every)]
    if every.size and np.ptp(every) > 0:
        room = 0.12 * np.ptp(every)
        ax.set_ylim(every.min() - room, every.max() + room)


def _sentence(found: TippingPoint) -> str:
    if found.status == "flips":
        at, error = rounded(found.at, found.error), rounded(found.error, found.error)
        return f"flips at {found.name} = {at} ± {error}"
    return {"holds": "holds all the way", "unknown": "no flip where these draws can tell"}[
        found.status
    ]
