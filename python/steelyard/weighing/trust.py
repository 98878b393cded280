"""What the weights themselves say about trust: findings for an answer as a whole."""

from __future__ import annotations

import math
from collections.abc import Iterator

import numpy as np
import numpy.typing as npt

from steelyard import _core
from steelyard.base import Draws
from steelyard.base.draws import Array
from steelyard.rules import RULES
from steelyard.verdicts import Finding, judge, shape_limit
from steelyard.weighing.series import chains_p_value, relative_efficiency
from steelyard.weighing.weigh import Weights

__all__ = ["excursions", "figure_findings", "shared_findings", "tail_share", "weight_findings"]

# Positions of the largest weights, lightest first, and the next largest weight.
Tail = tuple[npt.NDArray[np.int64], float]

# A tail that holds less of Σ w² than this is not judged by its shape: if it held ten times as
# much, errors would grow by a twentieth.
_IDLE_TAIL = 0.01


def weight_findings(weights: Weights, draws: Draws, ordered: bool) -> Iterator[Finding]:
    """Shape, effective sizes, largest share, divergence and excursions of the weights."""
    count, raw = draws.size, weights.raw
    varies = weights.raw_size < count or np.ptp(raw) > 0
    # One search for the largest weights serves both that look at them.
    tail = _core.largest(raw, _tail_length(count, weights.efficiency))
    divergence = math.log(count / weights.entropy_size) if weights.entropy_size > 0 else math.inf
    yield from figure_findings(
        count,
        weights.tail_shape,
        (weights.effective_size, weights.entropy_size),
        weights.largest_share,
        max(divergence, 0.0) / math.log(count),
        tail_share(raw, weights.raw_size, tail),
    )
    if ordered and varies:
        yield judge("autocorrelated_tail", excursions(raw, draws, weights.efficiency, tail))


def figure_findings(
    count: int,
    tail_shape: npt.ArrayLike,
    sizes: tuple[npt.ArrayLike, npt.ArrayLike],
    largest_share: npt.ArrayLike,
    divergence: npt.ArrayLike,
    tail: npt.ArrayLike | None = None,
) -> list[Finding]:
    """
    Figures of weights held against their rules, for one answer or for many at once.

    `sizes` are the effective and the entropy size, `divergence` is a share of the log of `count`;
    `tail` is the `tail_share`, without which every tail is judged by its shape.
    """
    spoken = None if tail is None else np.asarray(~(np.asarray(tail) < _IDLE_TAIL))
    return [
        judge("weight_shape", tail_shape, strained=shape_limit(count), spoken=spoken),
        judge("few_effective", sizes[0]),
        judge("few_effective_entropy", sizes[1]),
        judge("few_carry", largest_share),
        judge("saturated_divergence", divergence),
    ]


def _tail_length(count: int, efficiency: float) -> int:
    return math.ceil(min(0.2 * count, 3 * math.sqrt(count / efficiency)))


def tail_share(raw: Array, size: float | None = None, tail: Tail | None = None) -> float:
    """
    Share of the tail in ``Σ w²``: ``Σ (w² − u²)/Σ w²`` over the largest weights, u the cut-off.

    Errors of weighted means rest on ``Σ w²``: it is what a tail of whatever shape can be wrong
    about. NaN where there are too few draws for a tail. Known already may be `size`, the effective
    size of the weights, and `tail`, at least as many of the largest ones.
    """
    length = _tail_length(raw.size, 1.0)
    found = _core.largest(raw, length) if tail is None else tail
    if found is None:
        return math.nan
    indices, cut = found
    if len(indices) > length:
        indices, cut = indices[-length:], raw[indices[-length - 1]]
    largest = raw[indices]
    top = largest[-1]
    squares = ((raw / top) ** 2).sum() if size is None else 1 / top**2 / size
    return float(((largest / top) ** 2 - (cut / top) ** 2).sum() / squares)


def shared_findings(weights: Weights, draws: Draws, ordered: bool) -> Iterator[Finding]:
    """Findings that quantities share with the answer: shares of the chains, draws lost, pooling."""
    if draws.pooling is not None:
        yield from draws.pooling.findings
    if ordered and draws.chains > 1:
        top = np.array([weights.largest_share])
        column = weights.linear[:, None]
        yield judge("chain_share", float(chains_p_value(column, None, draws, top)[0]))
    if weights.raw.min() == 0:
        yield judge("draws_lost", float((weights.raw == 0).mean()))


def excursions(
    raw: Array, draws: Draws, efficiency: float | None = None, tail: Tail | None = None
) -> float:
    """
    From how many separate excursions of the chains the largest weights come.

    The largest weights (as many as smoothing replaces) are joined into one excursion where they
    stand in one chain no further apart than the integrated autocorrelation time of the weights.
    Known already may be `efficiency`, that of the weights, and `tail`, the largest of them.
    """
    if efficiency is None:
        efficiency = float(relative_efficiency(raw[:, None], draws, True)[0])
    length = _tail_length(draws.size, efficiency)
    found = _core.largest(raw, length) if tail is None else tail
    if found is None:
        return math.inf
    largest = np.sort(found[0][raw[found[0]] > found[1]])
    if len(largest) < max(RULES["autocorrelated_tail"].strained, length / 2):
        # So many draws tie at the top, or so few are there, that there is no tail to be judged.
        return math.inf
    gap = max(1, int(1 / efficiency))
    chain = np.searchsorted(draws.starts, largest, side="right")
    new = (np.diff(largest) > gap) | (np.diff(chain) != 0)
    return float(1 + int(new.sum()))
