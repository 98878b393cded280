"""Data that arrive batch by batch: an answer after each, and when a refit will be due."""

from __future__ import annotations

from collections.abc import Callable, Sequence
from dataclasses import dataclass
from html import escape
from pathlib import Path
from typing import TYPE_CHECKING, Any

import numpy as np

from steelyard.answers.answer import Answer
from steelyard.answers.reweigh import base_answer, reweigh
from steelyard.base import Base
from steelyard.base.draws import Array
from steelyard.base.likelihood import read_loglik_term
from steelyard.changes import Change, add
from steelyard.errors import ArgumentError, ArgumentTypeError, DrawsError
from steelyard.planning.arrival_files import VERSION, digest, read_archive, refuse
from steelyard.planning.forecast import Forecast, extrapolate, simulate
from steelyard.table import Table
from steelyard.verdicts import Verdict

if TYPE_CHECKING:
    from steelyard.show.plan_plots import ArrivalPlots

__all__ = ["Arrival", "Batch"]


@dataclass(frozen=True)
class Batch:
    """
    What one batch left of the draws.

    Attributes
    ----------
    name : str
        Its name.
    observations : int
        How many observations it had; 1 for a total.
    effective_size, tail_shape, largest_share : float
        Of the weights after it.
    level : str
        Level of the answer after it.
    """

    name: str
    observations: int
    effective_size: float
    tail_shape: float
    largest_share: float
    level: str


class Arrival:
    """
    A fit that takes in data as they arrive.

    Made by ``Fit.arrive``.

    Attributes
    ----------
    answer : Answer
        The answer after all batches so far.
    history : tuple of Batch
        What each batch left of the draws.

    Examples
    --------
    >>> import numpy as np, steelyard as sy
    >>> rng = np.random.default_rng(4)
    >>> rate = rng.normal(0.10, 0.02, size=(4, 500))
    >>> arrival = sy.Fit({"rate": rate}, {"rate": sy.Normal(0.10, 0.02)}).arrive()
    >>> week = -0.5 * ((rng.normal(0.11, 0.04, size=3) - rate[..., None]) / 0.04) ** 2
    >>> arrival.add("week 1", week).verdict.is_sound
    True
    """

    def __init__(self, base: Base) -> None:
        self._base = base
        self._totals: dict[str, Array] = {}
        self._history: list[Batch] = []
        self._answer = base_answer(base)
        self._base_size = self._answer.effective_size

    @property
    def answer(self) -> Answer:
        """The answer after all batches so far."""
        return self._answer

    @property
    def verdict(self) -> Verdict:
        """Of that answer."""
        return self._answer.verdict

    @property
    def history(self) -> tuple[Batch, ...]:
        """What each batch left of the draws."""
        return tuple(self._history)

    @property
    def base_size(self) -> float:
        """Effective size of the draws before any batch."""
        return self._base_size

    @property
    def change(self) -> Change | None:
        """The data that arrived, as a change of the base; None before any."""
        return add(dict(self._totals)) if self._totals else None

    def add(self, name: str, batch: Any) -> Answer:
        """
        Take in a batch.

        Parameters
        ----------
        name : str
            What it is called; each name once.
        batch : array_like or callable
            Its log likelihood at the draws, ``(chain, draw, *obs)`` or ``(n, *obs)``, or a callable
            that gives it.

        Returns
        -------
        Answer
            The answer after it.

        Raises
        ------
        ArgumentError, ArgumentTypeError
            For a name that a batch or a likelihood term has already.
        ShapeError, LikelihoodError, RatioError
            For another number of draws, NaN, +inf, or data that no draw makes possible.
        """
        if not isinstance(name, str) or not name:
            raise ArgumentTypeError("name", "a name", repr(name), "Name the batch.")
        if name in self._totals or name in (self._base.loglik or {}):
            raise ArgumentError(
                "name",
                "a name that no batch and no likelihood term has",
                f"{name!r}, which one has",
                "Give new data a name of their own; data of that name are in already.",
            )
        term = read_loglik_term(name, batch, self._base.draws, "batch")
        return self._take(name, term.total(self._base.draws), term.observations)

    def _take(self, name: str, total: Array, observations: int) -> Answer:
        answer = reweigh(self._base, add({**self._totals, name: total}))
        self._totals[name] = total
        self._answer = answer
        self._history.append(
            Batch(
                name,
                observations,
                answer.effective_size,
                answer.tail_shape,
                answer.largest_share,
                str(answer.verdict.level),
            )
        )
        return answer

    def forecast(
        self,
        simulated: Callable[..., Any] | None = None,
        *,
        batches: int = 10,
        repeats: int = 40,
        rng: Any = None,
    ) -> Forecast:
        """
        When a refit will be due.

        Parameters
        ----------
        simulated : callable, optional
            Gets ``({name: value of one draw}, rng)``; makes a batch as that draw predicts it and
            returns its log likelihood at all draws, ``(n, *obs)``. Without it the history is
            continued.
        batches : int, optional
            How many batches to look ahead.
        repeats : int, optional
            How many futures are simulated.
        rng : None, int or numpy.random.Generator, optional
            Seed or generator (SPEC 7).

        Returns
        -------
        Forecast
            The batch at which a refit is due, with its spread.

        Raises
        ------
        ArgumentError, ArgumentTypeError, ShapeError
            For counts below 1, or batches of another number of draws.

        Notes
        -----
        Simulated futures start from draws of the present answer, so that they need no data: the
        forecast can be had before the first batch.
        """
        for name, count in (("batches", batches), ("repeats", repeats)):
            if isinstance(count, bool) or not isinstance(count, int | np.integer) or count < 1:
                raise ArgumentError(name, "a whole number from 1 on", repr(count), "Say how many.")
        if simulated is None:
            sizes = [step.effective_size for step in self._history]
            levels = [step.level for step in self._history]
            return extrapolate(self._base_size, sizes, levels, int(batches))
        if not callable(simulated):
            raise ArgumentTypeError(
                "simulated", "a callable", type(simulated).__name__, "See the documentation."
            )
        so_far = sum(self._totals.values(), start=np.zeros(self._base.draws.size))
        return simulate(
            self._base,
            so_far,
            self._answer._weights.log,
            simulated,
            int(batches),
            int(repeats),
            rng,
        )

    def save(self, path: str | Path) -> None:
        """
        Write the batches to a file.

        Parameters
        ----------
        path : str or Path
            A NumPy archive: ``steelyard_arrival`` (the version, 1), ``draws`` (SHA-256 of names and
            values of the draws), ``names``, ``observations`` and ``totals``, the log likelihood of
            each batch at each draw ``(batches, n)``. Nothing in it is pickled.
        """
        names = list(self._totals)
        with Path(path).open("wb") as file:
            np.savez(
                file,
                steelyard_arrival=np.array(VERSION),
                draws=np.array(digest(self._base)),
                names=np.array(names, dtype=np.str_),
                observations=np.array([b.observations for b in self._history], dtype=np.int64),
                totals=np.array(list(self._totals.values())).reshape(
                    len(names), self._base.draws.size
                ),
            )

    @classmethod
    def load(cls, path: str | Path, fit: Any) -> Arrival:
        """
        Go on from a file.

        Parameters
        ----------
        path : str or Path
            What :meth:`save` wrote.
        fit : Fit
            The fit that it belongs to: draws are not saved with the batches.

        Returns
        -------
        Arrival
            With every batch taken in again, in its order.

        Raises
        ------
        DrawsError
            For a file that is something else or damaged, holds pickled objects, is of another
            version, or belongs to other draws.
        """
        made = cls(getattr(fit, "_record", fit))
        content = read_archive(path)
        if str(content["draws"]) != digest(made._base):
            raise DrawsError(
                str(path),
                "batches of these draws",
                "batches of others",
                "Pass the fit they are of.",
            )
        shape = (len(content["names"]), made._base.draws.size)
        if content["totals"].shape != shape and len(content["names"]):
            refuse(path, f"totals of shape {content['totals'].shape}, not {shape}")
        counts = content["observations"].tolist()
        for name, total, count in zip(
            content["names"].tolist(), content["totals"], counts, strict=True
        ):
            made._take(str(name), np.array(total, dtype=np.float64), int(count))
        return made

    def table(self) -> Table:
        """
        One row for each batch.

        Returns
        -------
        Table
            Observations, effective size, tail shape, largest share and level after it.
        """
        names = ("observations", "effective_size", "tail_shape", "largest_share", "level")
        columns: dict[str, Sequence[Any]] = {"batch": [step.name for step in self._history]}
        columns |= {name: [getattr(step, name) for step in self._history] for name in names}
        return Table(columns)

    @property
    def plot(self) -> ArrivalPlots:
        """Plot of the effective size after each batch."""
        from steelyard.show.plan_plots import ArrivalPlots

        return ArrivalPlots(self)

    def __str__(self) -> str:
        if not self._history:
            return f"no batch yet; {self._answer}"
        return f"{self.table()}\n{self.forecast()}\n{self._answer}"

    def __repr__(self) -> str:
        return f"<Arrival of {len(self._history)} batches, now {self.verdict.level}>"

    def _repr_html_(self) -> str:
        return self.table()._repr_html_() + f"<p>{escape(str(self.forecast()))}</p>"
