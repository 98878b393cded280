"""Every scenario of a plan answered from the same draws: one table, no row lost."""

from __future__ import annotations

import math
from collections.abc import Iterator, Mapping, Sequence
from dataclasses import dataclass, replace
from html import escape
from typing import TYPE_CHECKING, Any

import numpy as np

from steelyard import _core
from steelyard.answers.bands import batch_edges, critical_value
from steelyard.answers.estimate import Estimate
from steelyard.answers.quantities import Quantity, asked_for, event_mask
from steelyard.answers.student import student_cdf
from steelyard.answers.tabulate import element_names
from steelyard.arrays import Frozen, ReadOnly
from steelyard.base import Base
from steelyard.base.draws import Array
from steelyard.changes import Target
from steelyard.errors import ArgumentError, SteelyardError
from steelyard.planning.scenarios import Plan, Scenario
from steelyard.rules import RULES
from steelyard.sensitivity.families import remembering
from steelyard.sensitivity.gathering import Gathered, Shared
from steelyard.sensitivity.nodes import Columns, Study, node_blocks, own_weights, weight_findings
from steelyard.sensitivity.resistance import read_level
from steelyard.sensitivity.sweep import join_findings
from steelyard.sensitivity.targets import Formed, Targets
from steelyard.table import Table
from steelyard.verdicts import Finding, judge

if TYPE_CHECKING:
    from steelyard.show.shift_plots import TriagePlots

__all__ = ["Triage", "triage"]


@dataclass(frozen=True, eq=False)
class Triage(Frozen):
    """
    Answers to every scenario of a plan.

    Attributes
    ----------
    plan : Plan
        What was asked.
    names : tuple of str
        Of the scenarios that were answered, in order.
    value, shift : mapping of str to Estimate
        By quantity, one entry an answered scenario, then the quantity's own axes.
    quantiles : mapping of str to numpy.ndarray
        By quantity, the probabilities of the plan last; empty where none are asked for, NaN where
        too few draws lie beyond, and for events.
    failed : mapping of str to str
        Scenarios that could not be answered, and why; they stay in the table.
    critical : float
        Factor of the errors within which all shifts of the table lie together, 95 %.
    decision : str or None
        Label of the event whose level decides.
    """

    plan: Plan
    names: tuple[str, ...]
    value: Mapping[str, Estimate]
    shift: Mapping[str, Estimate]
    quantiles: Mapping[str, Array]
    failed: Mapping[str, str]
    critical: float
    decision: str | None

    def table(self) -> Table:
        """
        One row for each scenario and element of a quantity; failed scenarios have a row too.

        ``low`` and ``high`` are the simultaneous 95 % band of the shift; ``right_side`` is the
        Monte Carlo probability that the deciding event's probability is on the ``side`` where it
        seems to be, NaN where it is not sound.
        """
        names = ["scenario", "planned", "quantity", "value", "error", "shift", "shift_error"]
        names += [
            "low",
            "high",
            *self._quantile_names(),
            *(["side", "right_side"] if self.decision else []),
        ]
        names += ["level", "shift_level", "reasons"]
        rows = [row for s in self.plan.scenarios for row in self._rows(s.name, s.later)]
        columns = {name: [row[name] for row in rows] for name in names}
        shift_error = columns["shift_error"]
        errors = {"value": columns["error"], "error": columns["error"]}
        errors |= dict.fromkeys(("shift", "shift_error", "low", "high"), shift_error)
        errors |= dict.fromkeys(self._quantile_names(), columns["error"])
        return Table(columns, errors, self.plan.title, ["right_side"])

    def _quantile_names(self) -> list[str]:
        return [f"q{p:g}" for p in self.plan.probs or ()]

    def _rows(self, name: str, later: bool) -> Iterator[dict[str, Any]]:
        first = {"scenario": name, "planned": "later" if later else "yes"}
        if name in self.failed:
            figures = ("value", "error", "shift", "shift_error", "low", "high")
            blank = dict.fromkeys((*figures, *self._quantile_names()), math.nan)
            told = {"level": "failed", "shift_level": "failed", "reasons": self.failed[name]}
            yield {**first, "quantity": "", **blank, "side": "", "right_side": None, **told}
            return
        place = self.names.index(name)
        for label, estimate in self.value.items():
            shape = np.shape(estimate.value)[1:]
            like = Quantity(
                label, np.broadcast_to(0.0, (1, *shape)), estimate.dims[1:], estimate.labels
            )
            for element, inner in zip(element_names(label, like), np.ndindex(*shape), strict=True):
                yield {**first, "quantity": element, **self._figures(label, (place, *inner))}

    def _figures(self, label: str, at: tuple[int, ...]) -> dict[str, Any]:
        """Value, shift, band, levels and reasons of one element under one scenario."""
        pair = self.value[label], self.shift[label]
        value, shift = (float(e.value[at]) for e in pair)
        error, unsure = (float(e.error[at]) for e in pair)
        verdicts = [e.verdict[at] for e in pair]
        codes = dict.fromkeys(r.code for v in verdicts for r in v.reasons if r.level < "sound")
        half = self.critical * unsure
        return {
            "value": value,
            "error": error,
            "shift": shift,
            "shift_error": unsure,
            "low": shift - half,
            "high": shift + half,
            **self._quantiles_at(label, at),
            "side": self._side(label, value),
            "right_side": self._right_side(label, at),
            "level": str(verdicts[0].level),
            "shift_level": str(verdicts[1].level),
            "reasons": ", ".join(codes),
        }

    def _quantiles_at(self, label: str, at: tuple[int, ...]) -> dict[str, float]:
        names = self._quantile_names()
        found = self.quantiles[label][at] if names and label in self.quantiles else ()
        return dict(zip(names, map(float, found), strict=True)) if names else {}

    def _side(self, label: str, value: float) -> str:
        if label != self.decision or self.plan.level is None or math.isnan(value):
            return ""
        return "above" if value > self.plan.level else "not above"

    def _right_side(self, label: str, at: tuple[int, ...]) -> float | None:
        if label != self.decision or self.plan.level is None:
            return None
        found = self.value[label]
        if not found.verdict[at].is_sound or not found.error[at] > 0:
            return math.nan
        apart = np.abs(found.value[at] - self.plan.level) / found.error[at]
        return float(student_cdf(np.array([apart]), np.array([found.degrees[at]]))[0])

    @property
    def plot(self) -> TriagePlots:
        """Plot of the shifts, one line a scenario."""
        from steelyard.show.shift_plots import TriagePlots

        return TriagePlots(self)

    def __str__(self) -> str:
        plan = self.plan
        lines = [str(self.table()), "", f"plan {plan.hash}, {len(plan.scenarios)} scenarios"]
        if plan.locked is None:
            lines.append("not locked: nothing says that it was stated before the answers were seen")
        if not math.isnan(self.critical):
            each_way = f"{self.critical:.2f} errors each way"
            lines.append(f"low to high: simultaneous 95 % band, {each_way}")
        lines.append("Sensitivity of the fitted model only; model adequacy is not assessed.")
        return "\n".join(lines)

    def __repr__(self) -> str:
        return f"<Triage of {len(self.plan.scenarios)} scenarios, {len(self.failed)} failed>"

    def _repr_html_(self) -> str:
        return self.table()._repr_html_() + f"<p>plan {escape(self.plan.hash)}</p>"


def triage(
    base: Base,
    scenarios: Any,
    quantities: Any = None,
    event: Any = None,
    level: Any = None,
    probs: Any = None,
) -> Triage:
    """Every scenario answered; see ``Fit.triage``."""
    plan = _read_plan(scenarios, quantities, event, level, probs)
    asked, decision = _asked(base, plan)
    base = remembering(base)
    work = _Work(base, plan, asked)
    for part in node_blocks(len(plan.scenarios), base.draws.size):
        work.answer(plan.scenarios[part])
    names = tuple(work.names)
    lead, labels = (len(names),), {"scenario": np.array(names, dtype=object)}
    joined = join_findings(work.findings, work.widths)
    findings = [*joined, judge("base_unverified")]
    sizes = np.concatenate([*work.sizes, np.empty(0)])
    shared = Shared(base, work.study.own, sizes, findings, lead, labels)

    def finished(gathered: list[Gathered]) -> ReadOnly[Estimate]:
        columns = work.study.columns
        found = [g.cut(len(names)).finished(columns, shared) for g in gathered]
        return ReadOnly(dict(zip(asked, found, strict=True)))

    return Triage(
        plan,
        names,
        finished(work.value),
        finished(work.shift),
        ReadOnly(work.quantiles(sizes)),
        ReadOnly(work.failed),
        critical_value(np.concatenate(work.sums).T) if work.sums else math.nan,
        decision,
    )


class _Work:
    """The scenarios of a plan answered block by block, and what was learnt so far."""

    def __init__(self, base: Base, plan: Plan, asked: Mapping[str, Quantity]) -> None:
        self.base, self.plan, self.asked = base, plan, asked
        self.targets, own = Targets(base), own_weights(base)
        listed, count = list(asked.values()), len(plan.scenarios)
        columns, edges = Columns.of(listed, base, own), batch_edges(base.draws)
        self.study = Study(base, own, columns, edges, shift=True, keep=plan.probs is not None)
        self.value = Gathered.empty(listed, count)
        self.shift = Gathered.empty(listed, count, is_shift=True)
        self.names: list[str] = []
        self.failed: dict[str, str] = {}
        self.sizes: list[Array] = []
        self.widths: list[int] = []
        self.findings: list[list[Finding]] = []
        self.sums: list[Array] = []
        self._quantiles: list[Array] = []
        self._order = _core.sort_order(columns.rows.T) if self.study.keep else None

    def answer(self, scenarios: Sequence[Scenario]) -> None:
        """Answer some scenarios; those that are refused go to the failed ones."""
        formed = self.targets.form([scenario.change for scenario in scenarios])
        self._refuse_withheld(formed)
        for place in sorted(formed.errors):
            self.failed[scenarios[place].name] = str(formed.errors[place])
        good = [i for i in range(len(scenarios)) if i not in formed.errors]
        if not good:
            return
        whole = len(good) == len(scenarios)
        found = self.study.of(formed.ratios if whole else formed.ratios[good])
        part = slice(len(self.names), len(self.names) + len(good))
        made = [formed.made[i] for i in good]
        of_weights = weight_findings(found.about, self.base)
        self.findings.append([*self.targets.findings(made), *of_weights])
        for gathered, figures in ((self.value, found.value), (self.shift, found.shift)):
            assert figures is not None
            for one in gathered:
                one.put(part, figures)
        self.names += [scenarios[i].name for i in good]
        self.sizes.append(found.about[:, 2])
        self.widths.append(len(good))
        self.sums.append(found.sums.reshape(-1, found.sums.shape[-1]))
        if found.weights is not None:
            rows = self.study.columns.rows
            probs = np.array(self.plan.probs)
            self._quantiles.append(_core.quantile_many(rows.T, found.weights.T, probs, self._order))

    def _refuse_withheld(self, formed: Formed) -> None:
        """Quantities of predictive draws whose model changed are refused here."""
        for place, target in enumerate(formed.made):
            if isinstance(target, Target) and target.withheld:
                try:
                    _asked(replace(self.base, withheld=target.withheld), self.plan)
                except SteelyardError as error:
                    formed.errors[place] = error

    def quantiles(self, sizes: Array) -> dict[str, Array]:
        """
        Quantiles by quantity, ``(scenarios, *shape, probs)``.

        NaN where fewer effective draws lie beyond than a quantile needs, and for events.
        """
        if not self._quantiles:
            return {}
        columns, probs = self.study.columns, np.array(self.plan.probs)
        found = np.moveaxis(np.concatenate(self._quantiles, axis=1), 0, -1)
        found = (found + columns.centre[:, None]) * columns.unit[:, None]
        beyond = sizes[:, None] * columns.efficiency
        few = beyond[..., None] * np.minimum(probs, 1 - probs) < RULES["draws_beyond"].refit
        found = np.where(few | ~np.isnan(columns.events)[:, None], np.nan, found)
        return {
            label: found[:, one.place].reshape(len(sizes), *one.quantity.shape, len(probs))
            for label, one in zip(self.asked, self.value, strict=True)
        }


def _read_plan(scenarios: Any, quantities: Any, event: Any, level: Any, probs: Any) -> Plan:
    plan: Plan
    if not isinstance(scenarios, Plan):
        plan = Plan(scenarios, quantities, event, level, probs=probs)
    elif any(given is not None for given in (quantities, event, level, probs)):
        raise ArgumentError(
            "triage",
            "a plan that says itself what is asked",
            "a plan, and quantities, event, level or probs beside it",
            "State them in the plan.",
        )
    else:
        plan = scenarios
    if not plan.scenarios:
        raise ArgumentError("scenarios", "at least one", "none", "State what is to be asked.")
    if (plan.event is None) != (plan.level is None):
        raise ArgumentError(
            "level", "an event and its level together", "one of them", "State both, or neither."
        )
    if plan.level is not None:
        read_level(plan.level)
    return plan


def _asked(base: Base, plan: Plan) -> tuple[dict[str, Quantity], str | None]:
    asked = {}
    if plan.event is None or plan.quantities is not None:
        asked = asked_for(plan.quantities, base)
    if plan.event is None:
        return asked, None
    mask = event_mask(plan.event, base)
    if mask.columns.shape[1] != 1:
        raise ArgumentError("event", "one yes or no a draw", f"shape {mask.shape}", "Name one.")
    return {**asked, mask.label: mask}, mask.label
