"""A tempered run: its draws, its constant, its history, and how it goes on."""

from __future__ import annotations

import math
from collections.abc import Callable, Mapping, Sequence
from dataclasses import dataclass, replace
from functools import cached_property
from html import escape
from typing import TYPE_CHECKING, Any

import numpy as np

from steelyard import _core
from steelyard.answers import Answer, Estimate
from steelyard.arrays import plain_array
from steelyard.base import Base, Draws
from steelyard.base.draws import Array
from steelyard.base.reading import read_draws
from steelyard.digits import rounded, short
from steelyard.errors import ArgumentTypeError, ShapeError
from steelyard.repair.islands import log_masses
from steelyard.repair.particles import Particles, Step
from steelyard.repair.points import Densities, Points
from steelyard.repair.sweeping import Setting
from steelyard.repair.tempered_constants import bridged_constant, mean_weight_constant, run_findings
from steelyard.table import Table
from steelyard.verdicts import Finding, Verdict, judge
from steelyard.weighing.trust import weight_findings
from steelyard.weighing.weigh import base_weights, weigh_ratio

if TYPE_CHECKING:
    from steelyard.show.tempering_plots import TemperingPlots

__all__ = ["Tempered"]


@dataclass(frozen=True, eq=False)
class Tempered:
    """
    Weighted draws of a target, moved there from a source by temperatures.

    Made by :func:`steelyard.temper`.

    Attributes
    ----------
    names : tuple of str or None
        Names of the columns.
    stopped : str
        ``""`` for a run that reached the target, else why it stopped: ``"Ctrl-C"`` or
        ``"most_evaluations"``.

    Examples
    --------
    >>> import numpy as np, steelyard as sy
    >>> rng = np.random.default_rng(1)
    >>> rate = rng.normal(0.10, 0.02, size=(2000, 1))
    >>> def old(x):
    ...     return -0.5 * ((x[:, 0] - 0.10) / 0.02) ** 2
    >>> def new(x):
    ...     return -0.5 * ((x[:, 0] - 0.16) / 0.01) ** 2
    >>> tempered = sy.temper(rate, old, new, names=["rate"], rng=1)
    >>> abs(tempered.answer().mean("rate").value - 0.16) < 0.002
    True
    """

    _state: Particles
    _setting: Setting
    names: tuple[str, ...] | None = None
    stopped: str = ""

    @property
    def finished(self) -> bool:
        """Whether the target was reached and the last moves are done."""
        return self._state.finished

    @property
    def temperature(self) -> float:
        """λ reached, 1 at the target."""
        return self._state.temperature

    @property
    def evaluations(self) -> int:
        """Points at which source and target were evaluated; gradients count once more."""
        return self._state.evaluations

    @property
    def calls(self) -> int:
        """How many batches of points the functions were called with."""
        return self._state.calls

    @property
    def islands(self) -> int:
        """Number of islands; 1 for a run whose error comes from lineages."""
        return self._setting.islands.count

    @cached_property
    def _standing(self) -> tuple[Points, Array]:
        """Particles and their log weights at the temperature reached."""
        state, islands = self._state, self.islands
        moving = state.moving
        if moving is None or not moving.kept:
            return state.points, state.log_weights
        # A waste-free run that stopped among its moves: what it has kept so far.
        count, kept = len(state.points.x), len(moving.kept)
        order = np.arange(count * kept).reshape(kept, count).T.reshape(-1)
        masses = log_masses(state.log_weights, islands) - math.log(count * kept / islands)
        return Points.joined(list(moving.kept), order), np.repeat(masses, count * kept // islands)

    @cached_property
    def _remaining(self) -> Array | None:
        """Log weights still due from the temperature reached to the target; None when there."""
        if self.temperature >= 1:
            return None
        ratio = self._standing[0].ratio
        with np.errstate(invalid="ignore"):
            return np.asarray((1 - self.temperature) * ratio)

    @cached_property
    def log_weights(self) -> Array:
        """Normalised natural log weights of the draws for the target, shape ``(n,)``."""
        logs = self._target_logs
        return logs - float(_core.log_sum_exp(logs[:, None])[0])

    @property
    def _target_logs(self) -> Array:
        logs, left = self._standing[1], self._remaining
        return logs if left is None else logs + left

    @property
    def points(self) -> Array:
        """The draws, islands one after the other, shape ``(n, d)``."""
        return self._standing[0].x

    @property
    def effective_size(self) -> float:
        """``1/Σw²`` of the weights for the target."""
        return float(_core.effective_size(self.log_weights[:, None], False)[0])

    @cached_property
    def draws(self) -> Draws:
        """The draws by name, each island a chain; one vector ``x`` where no names were given."""
        return self._named(None)

    def _named(self, named: Callable[[Array], Mapping[str, Any]] | None) -> Draws:
        x, count = self.points, self.islands
        if named is not None:
            if not callable(named):
                raise ArgumentTypeError(
                    "named",
                    "a function of the points (n, d) that returns {name: (n, *shape)}",
                    f"a {type(named).__name__}",
                    "Pass a function, or nothing.",
                )
            given = _checked(named(x), len(x))
        elif self.names is None:
            given = {"x": x}
        else:
            given = {name: x[:, column] for column, name in enumerate(self.names)}
        chain = np.repeat(np.arange(count), len(x) // count)
        return replace(read_draws(given, chain=chain), has_chain_axis=True)

    @property
    def history(self) -> tuple[Step, ...]:
        """One entry a temperature, the one that a stopped run was at included."""
        state = self._state
        if state.moving is None or state.pending is None:
            return state.steps
        done = len(state.moving.distances)
        begun = replace(
            state.pending,
            sweeps=done,
            acceptance=state.moving.accepted / done if done else 0.0,
            jump=state.moving.jump,
            evaluations=state.moving.evaluations,
            beyond=state.moving.beyond,
        )
        return (*state.steps, begun)

    @cached_property
    def log_constant(self) -> Estimate:
        """
        Natural log of the target's normalising constant over the source's.

        The sum of the logs of mean weights. Its error comes from the islands, with Student's t of
        one degree less than there are; for a single island from the lineages of its particles.
        """
        return mean_weight_constant(self)

    @cached_property
    def bridged_constant(self) -> Estimate:
        """
        The same log constant from the particles of both sides of every step.

        By Meng and Wong's bridge between one temperature and the next, after its moves. It needs no
        more evaluations, and holds where the target's tails are heavier than the source's, which
        the mean of weights misses; it rests on moves that reach them.

        Raises
        ------
        ArgumentError
            For a run that has not reached the target, or of a single island.
        """
        return bridged_constant(self)

    @property
    def verdict(self) -> Verdict:
        """What may be said of the draws; that of a constant is its own."""
        return Verdict(self._findings)

    @cached_property
    def _findings(self) -> tuple[Finding, ...]:
        return tuple(run_findings(self))

    def answer(self, named: Callable[[Array], Mapping[str, Any]] | None = None) -> Answer:
        """
        The draws as an answer: means, quantiles, probabilities and their errors under the target.

        Parameters
        ----------
        named : callable, optional
            Gets the points ``(n, d)`` and returns ``{name: (n, *shape)}``, where quantities live in
            another space than the points.

        Returns
        -------
        Answer
            Each island is a chain. A run that stopped early is weighed the rest of the way.

        Raises
        ------
        ArgumentTypeError, DrawsError, ShapeError
            For a `named` that does not return draws.

        Examples
        --------
        >>> import numpy as np, steelyard as sy
        >>> start = np.random.default_rng(1).normal(size=(2000, 1))
        >>> run = sy.temper(
        ...     start, lambda x: -0.5 * x[:, 0] ** 2, lambda x: -2 * (x[:, 0] - 1) ** 2, rng=1
        ... )
        >>> list(run.answer(lambda x: {"rate": np.exp(x[:, 0])}).draws)
        ['rate']
        """
        draws = self.draws if named is None else self._named(named)
        logs = np.array(self._standing[1])
        base = Base(draws, log_weights=logs - float(_core.log_sum_exp(logs[:, None])[0]))
        if self._remaining is None:
            weights = base_weights(base)
            found = [judge("few_effective", weights.effective_size)]
        else:
            weights = weigh_ratio(self._remaining, base.log_weights, draws)
            found = list(weight_findings(weights, draws, True))
        return Answer(base, weights, weights, (*found, *self._findings))

    def table(self) -> Table:
        """
        The history, one row a temperature.

        Returns
        -------
        Table
            The figures of :class:`Step`.
        """
        steps = self.history
        columns: dict[str, Sequence[float]] = {
            "temperature": [s.temperature for s in steps],
            "conditional share": [s.conditional_share for s in steps],
            "effective size": [s.effective_size for s in steps],
            "tail shape": [s.tail_shape for s in steps],
            "log ratio": [s.log_ratio for s in steps],
            "sweeps": [s.sweeps for s in steps],
            "acceptance": [s.acceptance for s in steps],
            "jump": [s.jump for s in steps],
            "evaluations": [s.evaluations for s in steps],
        }
        return Table(columns)

    @property
    def plot(self) -> TemperingPlots:
        """Plots of the history; call it for the default one."""
        from steelyard.show.tempering_plots import TemperingPlots

        return TemperingPlots(self)

    def resume(
        self,
        source: Callable[[Array], Any] | None = None,
        target: Callable[[Array], Any] | None = None,
        *,
        source_gradient: Callable[[Array], Any] | None = None,
        target_gradient: Callable[[Array], Any] | None = None,
        most_evaluations: int | None = None,
        progress: Any = None,
    ) -> Tempered:
        """
        Go on where a run stopped, as though it never had.

        Parameters
        ----------
        source, target, source_gradient, target_gradient : callable, optional
            The functions again, where the run was pickled: functions are not stored.
        most_evaluations : int, optional
            Evaluations of the whole run, those done included; by default there is no limit.
        progress : bool or callable, optional
            As for :func:`steelyard.temper`.

        Returns
        -------
        Tempered
            Bit for bit the result of a run that was never stopped. A finished run is returned as
            it is.

        Raises
        ------
        ArgumentError, ArgumentTypeError
            Without functions after a pickle, or for a limit that is none.
        """
        from steelyard.repair.tempering import go_on

        given = (source, target, source_gradient, target_gradient)
        return go_on(self, given, most_evaluations, progress)

    def __getstate__(self) -> dict[str, Any]:
        # Functions are often lambdas, which cannot be pickled; resume takes them again.
        bare = replace(self._setting, densities=Densities(None, None))
        return {
            "_state": self._state,
            "_setting": bare,
            "names": self.names,
            "stopped": self.stopped,
        }

    def __setstate__(self, state: dict[str, Any]) -> None:
        self.__dict__.update(state)

    def _sentence(self) -> str:
        steps, count = len(self.history), len(self.points)
        cost = f"{self.evaluations:,} evaluations in {self.calls:,} calls"
        where = f"{count:,} draws in {self.islands} islands, {steps} temperatures, {cost}"
        if self.finished:
            return where
        return f"{where}; stopped at temperature {short(self.temperature)} by {self.stopped}"

    def __str__(self) -> str:
        constant = self.log_constant
        number = rounded(constant.value, constant.error)
        error = rounded(constant.error, constant.error)
        return (
            f"tempered: {self._sentence()}\n"
            f"log constant of target over source: {number} ± {error} ({constant.verdict.level})\n"
            f"verdict: {self.verdict}"
        )

    def __repr__(self) -> str:
        return f"<Tempered {self.verdict.level}: {self._sentence()}>"

    def _repr_html_(self) -> str:
        head = f"<p>Tempered: {escape(self._sentence())}<br>{escape(str(self.log_constant))}</p>"
        return head + self.verdict._repr_html_() + self.table()._repr_html_()


def _checked(named: Any, count: int) -> dict[str, Array]:
    """What the user's function made of the points."""
    if not isinstance(named, Mapping) or not named:
        raise ArgumentTypeError(
            "named(x)", "{name: (n, *shape)}", f"a {type(named).__name__}", "Return a mapping."
        )
    arrays = {name: plain_array(values, f"named(x)[{name!r}]") for name, values in named.items()}
    for name, array in arrays.items():
        if array.shape[:1] != (count,):
            raise ShapeError(
                f"named(x)[{name!r}]",
                f"shape ({count}, …), one row a point",
                f"shape {array.shape}",
                "Return a row for every point.",
            )
    return arrays
