"""What the weights themselves say about trust: findings for an answer as a whole."""

from __future__ import annotations

import math
from collections.abc import Iterator

import numpy as np

from steelyard.base import Draws
from steelyard.base.draws import Array
from steelyard.rules import RULES
from steelyard.verdicts import Finding, judge, shape_limit
from steelyard.weighing.series import chains_p_value, relative_efficiency
from steelyard.weighing.weigh import Weights

__all__ = ["excursions", "shared_findings", "tail_share", "weight_findings"]

# A tail that holds less of Σ w² than this is not judged by its shape: if it held ten times as
# much, errors would grow by a twentieth.
_IDLE_TAIL = 0.01


def weight_findings(weights: Weights, draws: Draws, ordered: bool) -> Iterator[Finding]:
    """Shape, effective sizes, largest share, divergence and excursions of the weights."""
    count = draws.size
    yield judge(
        "weight_shape",
        weights.tail_shape,
        strained=shape_limit(count),
        spoken=np.asarray(not tail_share(weights.raw) < _IDLE_TAIL),
    )
    yield judge("few_effective", weights.effective_size)
    yield judge("few_effective_entropy", weights.entropy_size)
    yield judge("few_carry", weights.largest_share)
    divergence = math.log(count / weights.entropy_size) if weights.entropy_size > 0 else math.inf
    yield judge("saturated_divergence", max(divergence, 0.0) / math.log(count))
    if ordered and np.ptp(weights.raw) > 0:
        yield judge("autocorrelated_tail", excursions(weights.raw, draws))


def tail_share(raw: Array) -> float:
    """
    Share of the tail in ``Σ w²``: ``Σ (w² − u²)/Σ w²`` over the largest weights, u the cut-off.

    Errors of weighted means rest on ``Σ w²``: it is what a tail of whatever shape can be wrong
    about. NaN where there are too few draws for a tail.
    """
    tail = math.ceil(min(0.2 * raw.size, 3 * math.sqrt(raw.size)))
    if tail >= raw.size:
        return math.nan
    unit = raw / raw.max()
    largest = np.partition(unit, raw.size - tail - 1)[raw.size - tail - 1 :]
    return float((largest**2 - largest.min() ** 2).sum() / (unit**2).sum())


def shared_findings(weights: Weights, draws: Draws, ordered: bool) -> Iterator[Finding]:
    """Findings that quantities share with the answer: shares of the chains, draws lost, pooling."""
    if draws.pooling is not None:
        yield from draws.pooling.findings
    if ordered and draws.chains > 1:
        ratio = weights.linear[:, None] * draws.size
        equal = np.full(draws.size, 1 / draws.size)
        yield judge("chain_share", float(chains_p_value(ratio, equal, draws)[0]))
    lost = float((weights.raw == 0).mean())
    if lost > 0:
        yield judge("draws_lost", lost)


def excursions(raw: Array, draws: Draws) -> float:
    """
    From how many separate excursions of the chains the largest weights come.

    The largest weights (as many as smoothing replaces) are joined into one excursion where they
    stand in one chain no further apart than the integrated autocorrelation time of the weights.
    """
    efficiency = float(relative_efficiency(raw[:, None], draws, True)[0])
    tail = math.ceil(min(0.2 * draws.size, 3 * math.sqrt(draws.size / efficiency)))
    cut = np.partition(raw, draws.size - tail - 1)[draws.size - tail - 1]
    largest = np.flatnonzero(raw > cut)
    if len(largest) < max(RULES["autocorrelated_tail"].strained, tail / 2):
        # So many draws tie at the top, or so few are there, that there is no tail to be judged.
        return math.inf
    gap = max(1, int(1 / efficiency))
    chain = draws.chain[largest]
    new = (np.diff(largest) > gap) | (np.diff(chain) != 0)
    return float(1 + int(new.sum()))
