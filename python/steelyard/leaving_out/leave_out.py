"""Leaving out: one pass over the log likelihood, by blocks of groups."""

from __future__ import annotations

import math
from dataclasses import replace
from functools import partial
from typing import Any

import numpy as np

from steelyard.base import Base
from steelyard.base.draws import Array
from steelyard.leaving_out.deletion import Deleted, Setting, Totals, delete_columns, setting_of
from steelyard.leaving_out.grouping import read_groups
from steelyard.leaving_out.groups import Groups, Positions
from steelyard.leaving_out.influence import Held, read_quantities
from steelyard.leaving_out.latents import own_latents
from steelyard.leaving_out.progress import Teller, teller
from steelyard.leaving_out.result import LeaveOut
from steelyard.leaving_out.sampling import (
    Sampled,
    choose,
    generator_of,
    raw_surrogate,
    surrogate_of,
)
from steelyard.verdicts import Finding, judge

__all__ = ["leave_out", "leave_out_groups"]


def leave_out(
    base: Base,
    groups: Any = None,
    *,
    term: str | None = None,
    conditional: Any = None,
    quantities: Any = None,
    sample: int | None = None,
    surrogate: Any = None,
    rng: Any = None,
    progress: Any = None,
) -> LeaveOut:
    """Leave out each observation or group; see ``Fit.leave_out``."""
    found = read_groups(base, groups, term, conditional)
    held = None if quantities is None else read_quantities(base, quantities)
    if sample is not None:
        return _sampled(base, found, held, sample, surrogate, rng, progress)
    return leave_out_groups(base, found, held, progress)


def leave_out_groups(
    base: Base, groups: Groups, held: Held | None = None, progress: Any = None
) -> LeaveOut:
    """Leave out all groups."""
    every = np.arange(groups.count, dtype=np.int64)
    setting = setting_of(base, None if held is None else held.columns)
    found, totals = _pass(setting, groups, every, teller(progress, groups.count))
    return LeaveOut(
        base, groups, every, found, totals, _notes(base, groups), _held=_filled(held, found)
    )


def _sampled(
    base: Base,
    groups: Groups,
    held: Held | None,
    sample: int,
    surrogate: Any,
    rng: Any,
    progress: Any,
) -> LeaveOut:
    chosen = choose(sample, groups.count, generator_of(rng))
    setting = setting_of(base, None if held is None else held.columns)
    cheap = surrogate_of(base, groups, setting, surrogate, teller(progress, groups.count))
    tell = teller(progress, len(chosen))
    found, totals = _pass(setting, groups, chosen, tell)
    factor = groups.count / len(chosen)
    drawn = cheap.values[chosen]
    own: Any = 0.0
    if surrogate is None:
        # What the exact scores of the groups drawn take the place of.
        own = raw_surrogate(groups, chosen, setting, lambda done: None).series
    shared = cheap.series - factor * own
    totals = Totals(
        factor * totals.left_out + shared,
        factor * totals.raw + shared,
        factor * totals.in_sample,
    )
    gap = found.score - drawn
    variance = groups.count**2 * (1 - 1 / factor) * float(np.var(gap, ddof=1)) / len(chosen)
    sampled = Sampled(
        len(chosen), groups.count, chosen, *_sums(cheap.values), drawn, math.sqrt(variance)
    )
    note = judge("groups_sampled", len(chosen), of=f"{groups.count:,}")
    notes = (*_notes(base, groups), note)
    return LeaveOut(base, groups, chosen, found, totals, notes, sampled, _held=_filled(held, found))


def _sums(values: Array) -> tuple[float, float]:
    return float(values.sum()), float((values**2).sum())


def _pass(
    setting: Setting, groups: Groups, chosen: Positions, tell: Teller
) -> tuple[Deleted, Totals]:
    found = Deleted.empty(len(chosen), setting.quantities.shape[1])
    totals = Totals.zero(setting.draws.size)
    for part, held, scored in groups.blocks(setting.draws, chosen, checked=False):
        refuse = partial(groups.refuse, setting.draws, chosen[part])
        figures, series = delete_columns(setting, held, scored, refuse)
        found.put(part, figures)
        totals.add(series)
        tell(part.stop)
    return found, totals


def _filled(held: Held | None, found: Deleted) -> Held | None:
    return None if held is None else replace(held, shift=found.shift, error=found.shift_error)


def _notes(base: Base, groups: Groups) -> tuple[Finding, ...]:
    """What is said of every group: base unverified, rows taken as independent, own effects."""
    pooling = base.draws.pooling
    notes = [judge("base_unverified"), *(() if pooling is None else pooling.findings)]
    if not groups.is_conditional:
        notes.append(judge("rows_independent"))
    latents = own_latents(base, groups)
    return tuple(notes if latents is None else [*notes, latents])
