"""The rungs by name, in order of price: each makes an answer, or says why it did not."""

from __future__ import annotations

from collections.abc import Callable, Mapping
from dataclasses import dataclass
from typing import TYPE_CHECKING

import numpy as np

from steelyard.answers import Answer
from steelyard.answers.estimating import Scale
from steelyard.answers.moved import Moved
from steelyard.base import Base
from steelyard.base.draws import Array
from steelyard.repair.matching import match_moments
from steelyard.verdicts import Finding, judge
from steelyard.weighing.supports import support_findings
from steelyard.weighing.trust import shared_findings, weight_findings
from steelyard.weighing.weigh import Weights, base_weights

if TYPE_CHECKING:
    from steelyard.repair.climbing import Climb

__all__ = ["MOVING", "RUNGS", "Outcome", "moved_answer"]


@dataclass(frozen=True, eq=False)
class Outcome:
    """
    What a rung gave: an answer, or why there is none.

    `evaluations` are those that the shared counter does not know of.
    """

    answer: Answer | None
    stopped: str = ""
    evaluations: int = 0


def smoothing(climb: Climb) -> Outcome:
    """The base's own draws, their largest weights smoothed."""
    target = climb.plain._target
    called = target is not None and any(
        callable(term.density.source) and term.density is not term.base
        for term in target.loglik.values()
    )
    return Outcome(climb.plain, "", climb.record.draws.size if called else 0)


def moment_matching(climb: Climb) -> Outcome:
    """The draws moved by affine maps."""
    evaluator = climb.evaluator
    matched = match_moments(climb.record, climb.start, evaluator.both, climb.purse)
    if matched is None:
        return Outcome(None, "" if climb.purse.is_empty else "no map made the tail lighter")
    record = evaluator.at(matched.x, climb.record.draws)
    how = f"mapped by {len(matched.steps)} affine maps, {matched.steps[-1]} last"
    return Outcome(moved_answer(climb, record, matched.weights, matched.ratio, how, is_paired=True))


def moved_answer(
    climb: Climb,
    record: Base,
    weights: Weights,
    log_ratio: Array,
    how: str,
    *,
    is_paired: bool,
    findings: tuple[Finding, ...] | None = None,
) -> Answer:
    """The answer of draws that are not the base's own."""
    if findings is None:
        findings = (
            *weight_findings(weights, record.draws, record.ordered),
            *shared_findings(weights, record.draws, record.ordered),
        )
    own = base_weights(climb.record)
    origin = Scale(climb.record, own, own, ())
    target = climb.plain._target
    supports = () if target is None else support_findings(climb.record, target)
    notes = [f for f in climb.plain._findings if f.code in ("base_unverified", "support_unknown")]
    found = (*findings, *supports, *notes, judge("draws_moved", how=how))
    unique = {(f.code, tuple(f.words.items())): f for f in found}
    base = own if is_paired else weights
    return Answer(
        record,
        weights,
        base,
        tuple(unique.values()),
        climb.change,
        target,
        Moved(origin, is_paired, np.array(log_ratio)),
    )


RUNGS: Mapping[str, Callable[[Climb], Outcome]] = {
    "smoothing": smoothing,
    "moment matching": moment_matching,
}
# Those that evaluate the densities at new points.
MOVING = ("moment matching", "tempering", "collapse")
