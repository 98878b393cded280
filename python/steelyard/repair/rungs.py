"""The rungs by name, in order of price: each makes an answer, or says why it did not."""

from __future__ import annotations

from collections.abc import Callable, Mapping
from dataclasses import replace
from typing import TYPE_CHECKING, Any

import numpy as np

from steelyard.answers import Estimate, reweigh
from steelyard.base import Base
from steelyard.base.draws import Array
from steelyard.base.ratios import refuse_bad_ratio
from steelyard.errors import (
    ArgumentTypeError,
    ChangeError,
    LikelihoodError,
    PriorError,
    SteelyardError,
)
from steelyard.repair.collapsing import collapse, collapse_plan
from steelyard.repair.evaluating import Evaluator, at_draws
from steelyard.repair.matching import match_moments, probe_plain
from steelyard.repair.outcomes import Outcome, moved_answer, not_possible, trust_findings
from steelyard.repair.pooling import pool_records
from steelyard.repair.prior_start import prior_draws, target_prior
from steelyard.repair.space import space_of
from steelyard.repair.tempered import Tempered
from steelyard.repair.tempering import temper
from steelyard.verdicts import judge
from steelyard.weighing.weigh import weigh_ratio

if TYPE_CHECKING:
    from steelyard.repair.climbing import Climb

__all__ = ["EMPTY", "INTERRUPTED", "MOVING", "RUNGS"]

# Weights of a lighter tail than this have finite third moments: nothing can hide in it.
_IDLE_SHAPE = 0.3
INTERRUPTED = "stopped by Ctrl-C"
EMPTY = "the limit was reached"
# Fewer are too few for the islands that the errors come from.
_LEAST_PARTICLES = 1000


def smoothing(climb: Climb) -> Outcome:
    """
    The base's own draws, their largest weights smoothed.

    Weights that look sound with a tail to speak of are held against draws further out, where there
    is code to evaluate these.
    """
    plain = climb.plain
    cost = _smoothing_cost(climb)
    if not plain.verdict.is_sound or plain.tail_shape < _IDLE_SHAPE:
        return Outcome(plain, "", cost)
    try:
        start, densities = climb.start, climb.evaluator.both
    except SteelyardError:
        return Outcome(plain, "", cost)
    found = probe_plain(climb.record, start, densities, climb.purse)
    if found is not None:
        plain = replace(plain, _findings=(*plain._findings, found))
    return Outcome(plain, "", cost)


def _smoothing_cost(climb: Climb) -> int:
    """Draws at which a callable term of the change was evaluated."""
    target = climb.plain._target
    called = target is not None and any(
        callable(term.density.source) and term.density is not term.base
        for term in target.loglik.values()
    )
    return climb.record.draws.size if called else 0


def moment_matching(climb: Climb) -> Outcome:
    """The draws moved by affine maps."""
    if climb.has_gap:
        return Outcome(None, "no map of the base's draws leaves its support")
    evaluator = climb.evaluator
    matched = match_moments(climb.record, climb.start, evaluator.both, climb.purse)
    if matched is None:
        return Outcome(None, "" if climb.purse.is_empty else "no map made the tail lighter")
    record = evaluator.at(matched.x, climb.record.draws)
    how = f"mapped by {len(matched.steps)} affine maps, {matched.steps[-1]} last"
    findings = (*trust_findings(matched.weights, record), *matched.findings)
    return Outcome(
        moved_answer(climb, record, matched.weights, matched.ratio, how, findings, is_paired=True)
    )


def collapsing(climb: Climb) -> Outcome:
    """The effects of a group whose family changes, integrated out and drawn anew."""
    record = climb.record
    try:
        plan = collapse_plan(record, climb.change)
    except (ChangeError, LikelihoodError, PriorError) as error:
        if climb.is_explicit:
            raise
        return Outcome(None, not_possible(error), applies=not isinstance(error, ChangeError))
    try:
        found = collapse(plan, climb.purse, climb.generator("collapse"))
    except ChangeError as error:
        if climb.is_explicit:
            raise
        return Outcome(None, not_possible(error))
    if found is None:
        return Outcome(None)
    refuse_bad_ratio(found.log_ratio, found.draws, "collapse")
    weights = weigh_ratio(found.log_ratio, record.log_weights, record.draws, ordered=record.ordered)
    moved = at_draws(record, found.draws)
    findings = trust_findings(weights, record)
    how = f"effects {found.name!r} integrated out and drawn anew"
    return Outcome(moved_answer(climb, moved, weights, found.ratio, how, findings, is_paired=True))


# Batches between two looks at the clock.
_BATCHES = 10
# Conditional effective size that a temperature keeps: at first, and where that was too little.
_EFFICIENCIES = (0.9, 0.97)


def tempering(climb: Climb) -> Outcome:
    """The draws moved by temperatures."""
    record, purse = climb.record, climb.purse
    try:
        evaluator = _beyond(climb) if climb.has_gap else climb.evaluator
    except PriorError as error:
        if climb.is_explicit:
            raise
        return Outcome(None, not_possible(error))
    particles = max(record.draws.size, _LEAST_PARTICLES)
    if not purse.allows(particles):
        return Outcome(None)
    run = _run(climb, evaluator, _EFFICIENCIES[0], particles)
    if run.finished and not run.verdict.is_sound and purse.allows(particles):
        # Once more with temperatures that lie closer; the better run counts.
        again = _run(climb, evaluator, _EFFICIENCIES[1], particles)
        run = again if again.finished and again.verdict.level > run.verdict.level else run
    answer = run.answer()
    start = " from the target's prior" if climb.has_gap else ""
    how = f"tempered{start} over {len(run.history)} temperatures in {run.islands} islands"
    moved = replace(evaluator.at(run.points, run.draws), ordered=True)
    made = moved_answer(
        climb,
        moved,
        answer._weights,
        run._standing[0].ratio,
        how,
        answer._findings,
        is_paired=False,
        log_constant=None if climb.has_gap else _constant(run),
    )
    said = "" if run.finished else INTERRUPTED if run.stopped == "Ctrl-C" else EMPTY
    return Outcome(made, said)


def pooling(climb: Climb) -> Outcome:
    """The draws of other fits of the same data beside those of the base."""
    if not climb.fits:
        return Outcome(None, applies=False)
    records = [climb.record, *(_record_of(fit) for fit in climb.fits)]
    count = sum(record.draws.size for record in records)
    # Callables are asked for every fit at the draws of all.
    cost = len(records) * count
    if not climb.purse.allows(cost):
        return Outcome(None)
    labels = ["base", *(f"fit {number}" for number in range(2, len(records) + 1))]
    pooled = pool_records(records, labels)
    answer = reweigh(replace(pooled.record, is_moved=True), climb.change)
    note = judge("draws_moved", how=f"pooled with those of {len(climb.fits)} other fits")
    return Outcome(replace(answer, _findings=(*answer._findings, note)), "", cost)


def _record_of(fit: Any) -> Base:
    record = fit if isinstance(fit, Base) else getattr(fit, "_record", None)
    if not isinstance(record, Base):
        raise ArgumentTypeError("fits", "fits", type(fit).__name__, "Make them with sy.Fit(…).")
    return record


def _constant(run: Tempered) -> Estimate:
    return run.bridged_constant if run.finished else run.log_constant


def _beyond(climb: Climb) -> Evaluator:
    """Prior and target of a target that reaches beyond the base's support, in its own space."""
    draft = climb.evaluator.draft
    terms = target_prior(climb.record, draft)
    space = space_of(climb.record, terms, climb.ascending)
    return Evaluator(climb.record, climb.change, space, climb.purse.spent, from_prior=True)


def _run(climb: Climb, evaluator: Evaluator, efficiency: float, particles: int) -> Tempered:
    """One run from the base draws to the target, within the limits."""
    purse, record = climb.purse, climb.record

    def sampled(size: int, generator: np.random.Generator) -> Array:
        terms = target_prior(record, evaluator.draft)
        return evaluator.space.free(prior_draws(record, terms, size, generator))

    run = temper(
        sampled if climb.has_gap else climb.start,
        evaluator.base,
        evaluator.target,
        start_log_weights=None if climb.has_gap else record.log_weights,
        size=particles,
        efficiency=efficiency,
        most_evaluations=particles,
        rng=climb.generator("tempering"),
    )
    while not run.finished and run.stopped != "Ctrl-C":
        purse.tell()
        if not purse.allows(1):
            break
        more = int(min(_BATCHES * len(run.points), purse.left))
        before = run.evaluations
        run = run.resume(most_evaluations=before + more)
        if run.evaluations == before and not run.finished:
            purse.is_empty = True
            break
    return run


RUNGS: Mapping[str, Callable[[Climb], Outcome]] = {
    "smoothing": smoothing,
    "collapse": collapsing,
    "moment matching": moment_matching,
    "pooling": pooling,
    "tempering": tempering,
}
# Those that evaluate the densities at new points.
MOVING = ("moment matching", "tempering")
