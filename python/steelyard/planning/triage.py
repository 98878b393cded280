"""Every scenario of a plan answered from the same draws: one table, no row lost."""

from __future__ import annotations

import math
from collections.abc import Iterator, Mapping
from dataclasses import dataclass, replace
from html import escape
from typing import TYPE_CHECKING, Any

import numpy as np

from steelyard.answers.bands import batch_edges, batch_sums, critical_value
from steelyard.answers.estimate import Estimate
from steelyard.answers.quantities import Quantity, event_mask
from steelyard.answers.tabulate import element_names
from steelyard.arrays import Frozen, ReadOnly
from steelyard.base import Base
from steelyard.base.draws import Array
from steelyard.changes import Target, form_target
from steelyard.errors import ArgumentError, SteelyardError
from steelyard.planning.scenarios import Plan
from steelyard.sensitivity.families import remembering
from steelyard.sensitivity.gathering import Gathered
from steelyard.sensitivity.nodes import (
    algebra_findings,
    node_blocks,
    own_weights,
    study_nodes,
    weigh_nodes,
    weight_findings,
)
from steelyard.sensitivity.resistance import read_level
from steelyard.sensitivity.sweep import asked_for, join_findings
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
    failed: Mapping[str, str]
    critical: float
    decision: str | None

    def table(self) -> Table:
        """
        One row for each scenario and element of a quantity; failed scenarios have a row too.

        ``low`` and ``high`` are the simultaneous 95 % band of the shift.
        """
        names = ["scenario", "planned", "quantity", "value", "error", "shift", "shift_error"]
        names += ["low", "high", *(["side"] if self.decision else [])]
        names += ["level", "shift_level", "reasons"]
        rows = [row for s in self.plan.scenarios for row in self._rows(s.name, s.later)]
        columns = {name: [row[name] for row in rows] for name in names}
        shift_error = columns["shift_error"]
        errors = {"value": columns["error"], "error": columns["error"]}
        errors |= dict.fromkeys(("shift", "shift_error", "low", "high"), shift_error)
        return Table(columns, errors, self.plan.title)

    def _rows(self, name: str, later: bool) -> Iterator[dict[str, Any]]:
        first = {"scenario": name, "planned": "later" if later else "yes"}
        if name in self.failed:
            blank = dict.fromkeys(
                ("value", "error", "shift", "shift_error", "low", "high"), math.nan
            )
            told = {"level": "failed", "shift_level": "failed", "reasons": self.failed[name]}
            yield {**first, "quantity": "", **blank, "side": "", **told}
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
            "side": self._side(label, value),
            "level": str(verdicts[0].level),
            "shift_level": str(verdicts[1].level),
            "reasons": ", ".join(codes),
        }

    def _side(self, label: str, value: float) -> str:
        if label != self.decision or self.plan.level is None or math.isnan(value):
            return ""
        return "above" if value > self.plan.level else "not above"

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
        lines.append(f"low to high: simultaneous 95 % band, {self.critical:.2f} errors each way")
        lines.append("Sensitivity of the fitted model only; model adequacy is not assessed.")
        return "\n".join(lines)

    def __repr__(self) -> str:
        return f"<Triage of {len(self.plan.scenarios)} scenarios, {len(self.failed)} failed>"

    def _repr_html_(self) -> str:
        return self.table()._repr_html_() + f"<p>plan {escape(self.plan.hash)}</p>"


def triage(
    base: Base, scenarios: Any, quantities: Any = None, event: Any = None, level: Any = None
) -> Triage:
    """Every scenario answered; see ``Fit.triage``."""
    plan = _read_plan(scenarios, quantities, event, level)
    asked, decision = _asked(base, plan)
    base = remembering(base)
    targets, failed = _targets(base, plan, asked)
    names = tuple(targets)
    value = {label: Gathered.empty(q, len(names)) for label, q in asked.items()}
    shift = {label: Gathered.empty(q, len(names)) for label, q in asked.items()}
    own, edges = own_weights(base), batch_edges(base.draws)
    sizes = np.empty(len(names))
    findings: list[list[Finding]] = []
    sums: list[Array] = []
    listed = list(targets.values())
    for part in node_blocks(len(names)):
        ratios = np.stack([t.log_ratio for t in listed[part]], axis=1)
        weighed = weigh_nodes(base, np.ascontiguousarray(ratios), own)
        sizes[part] = weighed.effective_size
        findings.append([*algebra_findings(base, listed[part]), *weight_findings(weighed)])
        for label, quantity in asked.items():
            for column in range(quantity.columns.shape[1]):
                f = np.ascontiguousarray(quantity.columns[:, column])
                is_event = quantity.is_event
                value[label].put(part, column, study_nodes(weighed, f, is_event=is_event))
                moved = study_nodes(weighed, f, shift=True, is_event=is_event)
                shift[label].put(part, column, moved)
                sums.append(batch_sums(moved.z, edges))
    joined = join_findings(findings, [p.stop - p.start for p in node_blocks(len(names))])
    joined.append(judge("base_unverified"))
    lead, labels = (len(names),), {"scenario": np.array(names, dtype=object)}

    def finished(gathered: Mapping[str, Gathered]) -> ReadOnly[Estimate]:
        return ReadOnly(
            {k: g.finished(base, own, sizes, joined, lead, labels) for k, g in gathered.items()}
        )

    critical = critical_value(np.concatenate(sums, axis=1)) if sums else math.nan
    return Triage(
        plan, names, finished(value), finished(shift), ReadOnly(failed), critical, decision
    )


def _read_plan(scenarios: Any, quantities: Any, event: Any, level: Any) -> Plan:
    plan: Plan
    if not isinstance(scenarios, Plan):
        plan = Plan(scenarios, quantities, event, level)
    elif quantities is not None or event is not None or level is not None:
        raise ArgumentError(
            "triage",
            "a plan that says itself what is asked",
            "a plan, and quantities, event or level beside it",
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


def _targets(
    base: Base, plan: Plan, asked: Mapping[str, Quantity]
) -> tuple[dict[str, Target], dict[str, str]]:
    """Targets of the scenarios that can be stated, and what went wrong with the others."""
    targets: dict[str, Target] = {}
    failed: dict[str, str] = {}
    for scenario in plan.scenarios:
        try:
            target = form_target(base, scenario.change)
            if target.withheld:
                # Quantities of predictive draws whose model changed are refused here.
                _asked(replace(base, withheld=target.withheld), plan)
        except SteelyardError as error:
            failed[scenario.name] = str(error)
        else:
            targets[scenario.name] = target
    return targets, failed
