"""From the figures of groups to log scores: estimates, totals, and what may be said of them."""

from __future__ import annotations

import math
from collections.abc import Mapping
from dataclasses import dataclass, replace

import numpy as np
import numpy.typing as npt

from steelyard import _core
from steelyard.answers import Estimate
from steelyard.answers.estimating import MANY
from steelyard.base import Base
from steelyard.base.draws import Array
from steelyard.verdicts import Finding, Verdict, judge
from steelyard.weighing.series import (
    chains_p_value,
    contributions_of,
    degrees_of,
    relative_efficiency,
    standard_error,
    tail_of,
)

__all__ = [
    "Ranks",
    "Refits",
    "Series",
    "level_counts",
    "of_total",
    "ranks_of",
    "silenced",
    "study_total",
]

# Log score and Monte Carlo error of groups that were fitted anew, by their flat position.
Ranks = npt.NDArray[np.int8]
Refits = Mapping[int, tuple[float, float]]


@dataclass(frozen=True)
class Series:
    """What one influence series shows: its error, tail shape, and whether the chains agree."""

    error: float
    tail_shape: float
    p_value: float
    effective_draws: float
    contributions: float = math.inf
    degrees: float = math.inf


def study_total(base: Base, series: Array, raw: Array, more: float = 0.0) -> Series:
    """
    Error and tail shape of a sum whose influence series is `series` ``(n,)``.

    ``error² = LRV(z)/S + more``, with `more` the variance of parts that other draws gave.
    """
    draws, ordered = base.draws, base.ordered
    z, z_raw = series[:, None], raw[:, None]
    own = float(standard_error(z, draws, ordered)[0])
    efficiency = relative_efficiency(z_raw, draws, ordered)
    equal = np.full(draws.size, 1 / draws.size)
    variance = float(_core.mean_square(z)[0])
    carried = contributions_of(z, efficiency, draws, ordered)
    return Series(
        math.sqrt(own**2 + more),
        float(tail_of(z_raw, efficiency, draws, ordered)[0]),
        float(chains_p_value(z, equal, draws)[0]) if ordered else 1.0,
        variance / own**2 if own > 0 else float(draws.size),
        float(carried[0]),
        float(degrees_of(carried, efficiency, draws)[0]),
    )


def of_total(value: float, series: Series, findings: list[Finding], label: str) -> Estimate:
    """The Estimate of a sum over groups."""
    own = [
        judge("quantity_shape", series.tail_shape, spoken=np.asarray(series.contributions < MANY)),
        judge("few_contributions", series.contributions),
        judge("chains_disagree", series.p_value),
    ]
    return Estimate(
        value,
        series.error,
        series.tail_shape,
        Verdict([*findings, *own]),
        series.effective_draws,
        degrees=series.degrees,
        label=label,
    )


def ranks_of(verdict: Verdict, shape: tuple[int, ...]) -> Ranks:
    """
    Levels as numbers: 0 refit, 1 strained, 2 sound.

    An array of a million levels that are objects takes seconds to compare.
    """
    rank = np.full(shape, 2, dtype=np.int8)
    for finding in verdict.findings:
        rank = np.minimum(rank, finding.rank)
    return rank


def level_counts(ranks: Ranks, what: str) -> list[Finding]:
    """How many groups are strained or ask for a refit, as findings about their sum."""
    bad, doubtful = int((ranks == 0).sum()), int((ranks == 1).sum())
    of = f"{ranks.size:,}"
    return [
        judge("groups_refit", bad, of=of, what=what),
        judge("groups_strained", doubtful, of=of, what=what),
    ]


def silenced(findings: list[Finding], mask: npt.NDArray[np.bool_]) -> list[Finding]:
    """Findings that say nothing of the groups in `mask`, whose figures come from elsewhere."""
    spoken = ~mask
    return [
        replace(f, spoken=spoken if f.spoken is None else f.spoken & spoken)
        if f.figure.shape == mask.shape
        else f
        for f in findings
    ]
