"""True refits of single groups, folded in."""

from __future__ import annotations

import math
from collections.abc import Mapping
from dataclasses import replace
from typing import TYPE_CHECKING, Any

import numpy as np

from steelyard.answers import Estimate
from steelyard.errors import ArgumentError, ArgumentTypeError, UnknownNameError
from steelyard.leaving_out.deletion import Totals, delete_columns, setting_of
from steelyard.verdicts import judge

if TYPE_CHECKING:
    from steelyard.leaving_out.result import LeaveOut

__all__ = ["with_refits"]


def with_refits(left: LeaveOut, log_scores: Mapping[Any, Any]) -> LeaveOut:
    """Fold refits in; see ``LeaveOut.with_refits``."""
    if not isinstance(log_scores, Mapping) or not log_scores:
        raise ArgumentTypeError(
            "log_scores",
            "{group: log score of a fit without it}",
            repr(log_scores)[:80],
            "Write for instance {21: -6.1}.",
        )
    refits = dict(left._refits)
    fresh = []
    for group, score in log_scores.items():
        position = left._groups.find(group, "log_scores")
        if position not in left._chosen:
            raise UnknownNameError(
                "log_scores", "a group that was left out", repr(group), "It is not in the sample."
            )
        if position not in refits:
            fresh.append(position)
        refits[position] = _read(score, group)
    factor = 1.0 if left.sampled is None else left.sampled.of / left.sampled.size
    totals = Totals(*(np.array(getattr(left._totals, n)) for n in ("left_out", "raw", "in_sample")))
    if fresh:
        # Their weights no longer count, nor does what these weights add to the error.
        chosen = np.sort(np.array(fresh, dtype=np.int64))
        setting = setting_of(left._base)
        for _, held, scored in left._groups.blocks(left._base.draws, chosen):
            _, series = delete_columns(setting, held, scored)
            series.in_sample[:] = 0.0
            totals.add(series, -factor)
    notes = [n for n in left._notes if n.code != "refits_folded"]
    notes.append(judge("refits_folded", len(refits)))
    return replace(left, _totals=totals, _notes=tuple(notes), _refits=refits)


def _read(score: Any, group: Any) -> tuple[float, float]:
    value, error = (score.value, score.error) if isinstance(score, Estimate) else (score, 0.0)
    is_number = isinstance(value, int | float | np.floating | np.integer)
    if isinstance(value, bool) or not is_number or not math.isfinite(float(value)):
        raise ArgumentError(
            f"log_scores[{group!r}]",
            "a finite log score, or an Estimate of one",
            repr(value),
            "Give the log density of the group under the fit without it.",
        )
    return float(value), float(error)
