"""Leaving out as tables: all groups, or those that cannot be relied on and what would cure them."""

from __future__ import annotations

from typing import TYPE_CHECKING, Any

import numpy as np

from steelyard.digits import short
from steelyard.levels import LEVELS
from steelyard.table import Table
from steelyard.verdicts import Verdict, needed_draws

if TYPE_CHECKING:
    from steelyard.leaving_out.result import LeaveOut

__all__ = ["scores_table", "untrusted_table"]


def scores_table(left: LeaveOut) -> Table:
    """One row a group."""
    rows = range(len(left._chosen))
    verdict, error = left.by_group.verdict, left.by_group.error.reshape(-1)
    places = [np.unravel_index(row, left.shape) for row in rows]
    own = [verdict[place] for place in places]
    columns: dict[str, list[Any]] = {
        "group": [left.name_of(row) for row in rows],
        "log_score": left._scores.tolist(),
        "error": error.tolist(),
        "in_sample": left._found.in_sample.tolist(),
        "tail_shape": left._found.tail_shape.tolist(),
        "effective_size": left._found.effective_size.tolist(),
        "level": [str(v.level) for v in own],
        "reasons": [_codes(v) for v in own],
    }
    digits = {name: error.tolist() for name in ("log_score", "error", "in_sample")}
    return Table(columns, digits)


def untrusted_table(left: LeaveOut) -> Table:
    """Groups below sound, worst first."""
    rank = left._ranks.reshape(-1)
    shape = left._found.tail_shape
    rows = [int(r) for r in np.lexsort((-shape, rank)) if rank[r] < 2]
    columns: dict[str, list[Any]] = {
        "group": [left.name_of(row) for row in rows],
        "level": [LEVELS[rank[row]] for row in rows],
        "log_score": [float(left._scores[row]) for row in rows],
        "tail_shape": [float(shape[row]) for row in rows],
        "effective_size": [float(left._found.effective_size[row]) for row in rows],
        "cure": [_cure(left, float(shape[row])) for row in rows],
    }
    return Table(columns)


def _codes(verdict: Verdict) -> str:
    return ", ".join(r.code for r in verdict.reasons if r.level < "sound")


def _cure(left: LeaveOut, tail_shape: float) -> str:
    """What would make the weights of a group usable, cheapest first."""
    cures = []
    if any(n.code == "own_latents" and int(n.rank) < 2 for n in left._notes):
        cures.append("integrate its own effects out and pass conditional=")
    terms = left._base.loglik or {}
    term = terms.get(left._groups.term.name)
    movable = term is not None and callable(term.source) and not hasattr(term.source, "shape")
    if movable and left._base.prior is not None:
        cures.append("moment matching by repair.left_out")
    if tail_shape < 1 and needed_draws(tail_shape) <= 100 * left._base.draws.size:
        cures.append(f"{short(needed_draws(tail_shape))} draws")
    cures.append("a refit without it, folded in by with_refits")
    return "; or ".join(cures)
