"""Which refits, pooled with the base, let every scenario be answered well enough."""

from __future__ import annotations

from collections.abc import Mapping, Sequence
from dataclasses import dataclass
from html import escape
from typing import TYPE_CHECKING, Any

import numpy as np
import numpy.typing as npt

from steelyard.answers.estimate import Estimate
from steelyard.arrays import Frozen, ReadOnly
from steelyard.base import Base
from steelyard.base.draws import Array
from steelyard.base.names import close_names
from steelyard.changes import form_target
from steelyard.digits import short
from steelyard.errors import ArgumentError, ArgumentTypeError, UnknownNameError
from steelyard.levels import rank_of
from steelyard.planning.predicting import BASE, Problem
from steelyard.planning.scenarios import Plan, read_scenarios
from steelyard.table import Table
from steelyard.verdicts import Verdict

if TYPE_CHECKING:
    from steelyard.show.plan_plots import RefitPlots

__all__ = ["BASE", "RefitPlan", "plan_refits"]


@dataclass(frozen=True, eq=False)
class RefitPlan(Frozen):
    """
    Refits to be pooled with the base, and what each scenario gets from the pool.

    Attributes
    ----------
    names : tuple of str
        The scenarios, in order.
    refits : tuple of str
        Scenarios to be refitted, most useful first.
    shares : mapping of str to float
        Share of the pool's draws that the base (``"base"``) and each refit should have.
    efficiency : Estimate
        Effective draws of each scenario to one draw of the pool, predicted from the base draws.
    from_base : Estimate
        The same from the base alone.
    between : numpy.ndarray
        Efficiency of answering a scenario (column) from draws of another (row) alone; the base has
        the first row. What concerns scenarios out of reach is not to be relied on.
    out_of_reach : tuple of str
        Scenarios of which the base draws can predict nothing; each is refitted itself.
    broadest : str
        What would serve the worst served scenario best as the only base.
    wanted : float
        The efficiency asked for.
    cost : float
        Price of the refits together.
    """

    names: tuple[str, ...]
    refits: tuple[str, ...]
    shares: Mapping[str, float]
    efficiency: Estimate
    from_base: Estimate
    between: Array
    out_of_reach: tuple[str, ...]
    broadest: str
    wanted: float
    cost: float

    @property
    def verdict(self) -> Verdict:
        """Whether the predictions can be relied on: that of the worst scenario."""
        levels = [rank_of(level) for level in self.efficiency.verdict.level]
        return self.efficiency.verdict[int(np.argmin(levels))]

    @property
    def reached(self) -> npt.NDArray[np.bool_]:
        """Whether each scenario reaches the efficiency asked for, as predicted."""
        return np.asarray(self.efficiency.value >= self.wanted * (1 - 1e-9))

    @property
    def advice(self) -> str:
        """What to do first, in one sentence."""
        if not self.refits:
            return "No refit is needed: the base draws answer every scenario."
        if self.out_of_reach:
            why = (
                "nothing can be predicted of it from here"
                if self.broadest in self.out_of_reach
                else "its draws reach further than these"
            )
            return (
                f"Refit {self.broadest!r} first, pool it and plan again: {why}, and fewer refits "
                "may then do."
            )
        least = self.between.min(axis=1)
        row = 0 if self.broadest == BASE else 1 + self.names.index(self.broadest)
        return (
            f"The broadest useful base is {self.broadest!r}: from it alone the least efficiency "
            f"is {short(float(least[row]))}, from the present base {short(float(least[0]))}."
        )

    def table(self) -> Table:
        """
        One row for each scenario.

        Returns
        -------
        Table
            Efficiency from the base and from the pool with errors, whether it is to be refitted
            and with which share, whether it reaches what is wanted, level and reasons.
        """
        columns: dict[str, list[Any]] = {name: [] for name in _COLUMNS}
        for place, name in enumerate(self.names):
            verdict = self.efficiency.verdict[place]
            codes = dict.fromkeys(r.code for r in verdict.reasons if r.level < "sound")
            row = {
                "scenario": name,
                "from_base": float(self.from_base.value[place]),
                "from_pool": float(self.efficiency.value[place]),
                "error": float(self.efficiency.error[place]),
                "refit": "yes" if name in self.refits else "",
                "share": float(self.shares.get(name, 0.0)),
                "reached": "yes" if self.reached[place] else "no",
                "level": str(verdict.level),
                "reasons": ", ".join(codes) or ("out of reach" * (name in self.out_of_reach)),
            }
            for key, value in row.items():
                columns[key].append(value)
        errors = {
            "from_base": [float(e) for e in self.from_base.error],
            "from_pool": columns["error"],
            "error": columns["error"],
        }
        return Table(columns, {k: [max(e, 1e-3) for e in v] for k, v in errors.items()})

    @property
    def plot(self) -> RefitPlots:
        """Plot of efficiencies with and without the refits."""
        from steelyard.show.plan_plots import RefitPlots

        return RefitPlots(self)

    def __str__(self) -> str:
        shares = ", ".join(f"{name} {share:.2f}" for name, share in self.shares.items())
        missed = int((~self.reached).sum())
        lines = [
            str(self.table()),
            "",
            f"{len(self.refits)} refits of {len(self.names)} scenarios, cost {short(self.cost)}; "
            f"efficiency wanted {self.wanted:g}",
            f"shares of the pool: {shares}",
            self.advice,
        ]
        if missed:
            lines.append(
                f"{missed} scenarios do not reach it from one pool: ask for less, or split the list"
            )
        return "\n".join(lines)

    def __repr__(self) -> str:
        return f"<RefitPlan: {', '.join(self.refits) or 'no refit'}>\n{self.table()}"

    def _repr_html_(self) -> str:
        return self.table()._repr_html_() + f"<p>{escape(self.advice)}</p>"


_COLUMNS = (
    "scenario",
    "from_base",
    "from_pool",
    "error",
    "refit",
    "share",
    "reached",
    "level",
    "reasons",
)


def plan_refits(base: Base, scenarios: Any, efficiency: float = 0.5, cost: Any = None) -> RefitPlan:
    """Fewest refits for a list of scenarios; see ``Fit.plan_refits``."""
    read = scenarios.scenarios if isinstance(scenarios, Plan) else read_scenarios(scenarios)
    if not read:
        raise ArgumentError("scenarios", "at least one", "none", "State what is to be asked.")
    names = tuple(one.name for one in read)
    if BASE in names:
        raise ArgumentError("scenarios", "names other than 'base'", "'base'", "Rename it.")
    wanted = _wanted(efficiency)
    prices = _prices(cost, names)
    problem = Problem(base, names, [form_target(base, one.change) for one in read])
    chosen = _cover(problem, wanted, prices)
    shares = problem.shares(chosen)[0]
    rows = [0, *(1 + place for place in chosen)]
    held = np.zeros(1 + len(names))
    held[rows] = shares
    order = sorted(chosen, key=lambda place: (-held[1 + place], place))
    alone = np.zeros_like(held)
    alone[0] = 1.0
    return RefitPlan(
        names,
        tuple(names[place] for place in order),
        ReadOnly({BASE: float(held[0]), **{names[p]: float(held[1 + p]) for p in order}}),
        problem.estimate(held, refitted=chosen),
        problem.estimate(alone, refitted=()),
        problem.between(),
        tuple(name for name, far in zip(names, problem.far, strict=True) if far),
        problem.broadest(),
        wanted,
        float(prices[list(chosen)].sum()) if chosen else 0.0,
    )


def _wanted(efficiency: Any) -> float:
    if isinstance(efficiency, bool) or not isinstance(efficiency, int | float | np.floating):
        raise ArgumentTypeError("efficiency", "a number", repr(efficiency), "Write 0.5.")
    if not 0 < efficiency < 1:
        raise ArgumentError(
            "efficiency",
            "effective draws to one draw of the pool, between 0 and 1",
            f"{efficiency!r}",
            "Write 0.5.",
        )
    return float(efficiency)


def _prices(cost: Any, names: Sequence[str]) -> Array:
    if cost is None:
        return np.ones(len(names))
    if not isinstance(cost, Mapping):
        if isinstance(cost, bool) or not isinstance(cost, int | float | np.number):
            raise ArgumentTypeError(
                "cost", "a number, or {scenario: number}", repr(cost), "State prices of refits."
            )
        cost = dict.fromkeys(names, cost)
    for name in cost:
        if name not in names:
            raise UnknownNameError(
                "cost", "a scenario of the list", repr(name), close_names(str(name), names)
            )
    prices = np.array([float(cost.get(name, 1.0)) for name in names])
    if not (np.isfinite(prices) & (prices > 0)).all():
        raise ArgumentError("cost", "positive prices", str(dict(cost)), "Price each refit.")
    return prices


def _met(problem: Problem, chosen: Sequence[int], wanted: float) -> float:
    """How many scenarios reach what is wanted, and how near the others come, at equal shares."""
    return float(np.minimum(problem.equal(chosen) / wanted, 1.0).sum())


def _cover(problem: Problem, wanted: float, prices: Array) -> tuple[int, ...]:
    """Greedy cover by price, then refits that turn out not to be needed taken back."""
    goal = wanted * (1 - 1e-9)
    chosen = [int(place) for place in np.flatnonzero(problem.far)]
    while True:
        reached = problem.shares(chosen)[1]
        left = [place for place in range(len(prices)) if place not in chosen]
        if (reached >= goal).all() or not left:
            break
        before = _met(problem, chosen, wanted)
        worth = {
            place: (_met(problem, [*chosen, place], wanted) - before) / prices[place]
            for place in left
        }
        chosen.append(max(left, key=worth.__getitem__))
    # Where nothing reaches it, as few as come within a hundredth of the best.
    goal = min(goal, 0.99 * float(problem.shares(chosen)[1].min()))
    for place in sorted(chosen, key=lambda place: -prices[place]):
        fewer = [other for other in chosen if other != place]
        if not problem.far[place] and (problem.shares(fewer)[1] >= goal).all():
            chosen = fewer
    return tuple(chosen)
