"""What a rung gives: an answer from new draws, or why there is none."""

from __future__ import annotations

from dataclasses import dataclass
from typing import TYPE_CHECKING

import numpy as np

from steelyard.answers import Answer, Estimate
from steelyard.answers.estimating import Scale
from steelyard.answers.moved import Moved
from steelyard.base import Base
from steelyard.base.draws import Array
from steelyard.errors import SteelyardError
from steelyard.verdicts import Finding, judge
from steelyard.weighing.supports import support_findings
from steelyard.weighing.trust import shared_findings, weight_findings
from steelyard.weighing.weigh import Weights, base_weights

if TYPE_CHECKING:
    from steelyard.repair.climbing import Climb

__all__ = ["Outcome", "moved_answer", "not_possible", "trust_findings"]


@dataclass(frozen=True, eq=False)
class Outcome:
    """
    What a rung gave: an answer, or why there is none.

    `evaluations` are those that the shared counter does not know of; `applies` is False for a rung
    that has nothing to do with the change.
    """

    answer: Answer | None
    stopped: str = ""
    evaluations: int = 0
    applies: bool = True


def trust_findings(weights: Weights, record: Base) -> tuple[Finding, ...]:
    """What weights of draws in the order of a record say about trust."""
    return (
        *weight_findings(weights, record.draws, record.ordered),
        *shared_findings(weights, record.draws, record.ordered),
    )


def not_possible(error: SteelyardError) -> str:
    """What bars a rung, in a line."""
    return f"not possible: {error.argument} is {error.came}"


def moved_answer(
    climb: Climb,
    record: Base,
    weights: Weights,
    log_ratio: Array,
    how: str,
    findings: tuple[Finding, ...],
    *,
    is_paired: bool,
    log_constant: Estimate | None = None,
) -> Answer:
    """The answer of draws that are not the base's own."""
    own = base_weights(climb.record)
    origin = Scale(climb.record, own, own, ())
    target = climb.plain._target
    # Draws that started from the target's own prior leave nothing of its support out.
    reached = target is None or "target's prior" in how
    supports = () if target is None or reached else support_findings(climb.record, target)
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
        Moved(origin, is_paired, np.array(log_ratio), log_constant),
    )
