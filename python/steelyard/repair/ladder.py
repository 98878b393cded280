"""The ladder: what each rung cost, what it gave, and why it stopped."""

from __future__ import annotations

import math
from collections.abc import Iterator
from dataclasses import dataclass
from html import escape
from typing import TYPE_CHECKING

from steelyard.digits import short
from steelyard.errors import UnknownNameError
from steelyard.table import Table
from steelyard.verdicts import Verdict

if TYPE_CHECKING:
    from steelyard.show.ladder_plots import LadderPlots

__all__ = ["Ladder", "Rung"]


@dataclass(frozen=True)
class Rung:
    """
    One way of repair, tried.

    Attributes
    ----------
    name : str
        Which.
    evaluations : int
        Points at which the densities were evaluated.
    seconds : float
        Time that it took.
    effective_size, tail_shape : float
        Of the weights that it gave; NaN where it gave none.
    verdict : Verdict or None
        Of the answer that it gave.
    stopped : str
        Why it stopped, in words.

    Examples
    --------
    >>> from steelyard.repair import Rung
    >>> Rung("smoothing", 0, 0.01, 812.0, 0.4, None, "sound").level
    ''
    """

    name: str
    evaluations: int
    seconds: float
    effective_size: float
    tail_shape: float
    verdict: Verdict | None
    stopped: str

    @property
    def level(self) -> str:
        """The level of its verdict, to be compared like one; empty where there is none."""
        return "" if self.verdict is None else self.verdict.level


@dataclass(frozen=True, eq=False)
class Ladder:
    """
    The rungs that a repair climbed.

    Made by ``Fit.repair``; the answer's ``ladder``.

    Attributes
    ----------
    rungs : tuple of Rung
        In the order they were tried.
    chosen : str
        Name of the rung whose answer was returned.

    Examples
    --------
    >>> import numpy as np, steelyard as sy
    >>> rate = np.random.default_rng(1).normal(0.10, 0.02, size=(4, 500))
    >>> def readings(draws):
    ...     return -0.5 * ((draws["rate"] - 0.10) / 0.02) ** 2
    >>> fit = sy.Fit({"rate": rate}, {"rate": sy.Flat()}, readings)
    >>> answer = fit.repair(sy.swap_loglik(lambda d: readings({"rate": d["rate"] - 0.1})))
    >>> [rung.name for rung in answer.ladder], answer.ladder.chosen
    (['smoothing', 'moment matching'], 'moment matching')
    """

    rungs: tuple[Rung, ...]
    chosen: str

    def __iter__(self) -> Iterator[Rung]:
        return iter(self.rungs)

    def __len__(self) -> int:
        return len(self.rungs)

    def __getitem__(self, name: str) -> Rung:
        for rung in self.rungs:
            if rung.name == name:
                return rung
        raise UnknownNameError(
            "rung", f"one of {', '.join(r.name for r in self.rungs)}", repr(name), "Name one tried."
        )

    @property
    def evaluations(self) -> int:
        """Points evaluated on all rungs."""
        return sum(rung.evaluations for rung in self.rungs)

    @property
    def seconds(self) -> float:
        """Time on all rungs."""
        return sum(rung.seconds for rung in self.rungs)

    def table(self) -> Table:
        """
        One row a rung.

        Returns
        -------
        Table
            Columns ``rung``, ``evaluations``, ``seconds``, ``effective size``, ``tail shape``,
            ``level`` and ``stopped``.
        """
        rungs = self.rungs
        return Table(
            {
                "rung": [r.name for r in rungs],
                "evaluations": [r.evaluations for r in rungs],
                "seconds": [float(f"{r.seconds:.2g}") for r in rungs],
                "effective size": [_figure(r.effective_size) for r in rungs],
                "tail shape": [_figure(r.tail_shape) for r in rungs],
                "level": [str(r.level) for r in rungs],
                "stopped": [r.stopped for r in rungs],
            }
        )

    @property
    def plot(self) -> LadderPlots:
        """Plots of the ladder; call it for the default one."""
        from steelyard.show.ladder_plots import LadderPlots

        return LadderPlots(self)

    def _head(self) -> str:
        return f"ladder: {self.evaluations:,} evaluations, answered by {self.chosen}"

    def __str__(self) -> str:
        return f"{self._head()}\n{self.table()}"

    def __repr__(self) -> str:
        return f"<Ladder of {len(self)}: {self._head()}>"

    def _repr_html_(self) -> str:
        return f"<p>{escape(self._head())}</p>{self.table()._repr_html_()}"


def _figure(value: float) -> str:
    """A figure as text: an absent one leaves its cell empty."""
    if math.isnan(value):
        return ""
    if math.isinf(value):
        return "none" if value < 0 else "not fitted"
    return short(float(f"{value:.3g}"))
