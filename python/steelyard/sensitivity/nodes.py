"""Many changes of one base at once: their weights stand side by side as columns."""

from __future__ import annotations

import math
from collections.abc import Iterator, Sequence
from dataclasses import dataclass, replace
from itertools import pairwise
from typing import Any

import numpy as np

from steelyard import _core
from steelyard.answers.estimating import Series
from steelyard.answers.reweigh import _unknown_supports
from steelyard.base import Base, Draws
from steelyard.base.draws import Array
from steelyard.changes import Target
from steelyard.verdicts import Finding, judge, shape_limit
from steelyard.weighing.preflight import preflight
from steelyard.weighing.series import (
    _welch,
    carried,
    chains_p_value,
    contributions_of,
    relative_efficiency,
    standard_error,
    tail_of,
)
from steelyard.weighing.trust import _IDLE_TAIL, excursions, tail_share
from steelyard.weighing.weigh import Weights, base_weights, weigh_ratio

__all__ = [
    "NodeSeries",
    "Nodes",
    "algebra_findings",
    "node_blocks",
    "own_weights",
    "study_nodes",
    "weigh_nodes",
    "weight_findings",
]

# Nodes whose weights are held at a time.
WIDTH = 64
# A spectral estimate from n effective draws varies like a chi-square of about a third as many.
_FREEDOM = 3
_FEWEST = 20
_SHORTEST = 50


@dataclass(frozen=True, eq=False)
class Nodes:
    """
    Weights of several targets over the same draws, one column a target.

    Attributes
    ----------
    linear, raw : numpy.ndarray
        Normalised weights ``(n, B)``, smoothed and not.
    own : Weights
        Weights of the base.
    log_mean_ratio, tail_shape, effective_size, entropy_size, largest_share : numpy.ndarray
        As in `Weights`, ``(B,)``.
    """

    base: Base
    own: Weights
    linear: Array
    raw: Array
    log_mean_ratio: Array
    tail_shape: Array
    effective_size: Array
    entropy_size: Array
    largest_share: Array

    @property
    def count(self) -> int:
        """Number of targets."""
        return int(self.linear.shape[1])


def node_blocks(count: int) -> Iterator[slice]:
    """Blocks of nodes, so that the weights of all are never held."""
    for start in range(0, count, WIDTH):
        yield slice(start, min(start + WIDTH, count))


def own_weights(base: Base) -> Weights:
    """Weights of the base as a shift needs them: smoothed by the same function as the target's."""
    if base.log_weights is None:
        return base_weights(base)
    zero = np.zeros(base.draws.size)
    return weigh_ratio(zero, base.log_weights, base.draws, ordered=base.ordered)


def weigh_nodes(base: Base, ratios: Array, own: Weights) -> Nodes:
    """Weights from log ratios ``(n, B)``, smoothed as those of a single answer."""
    draws, given = base.draws, base.log_weights
    total = ratios if base.reference is None else ratios + base.reference[:, None]
    base_sum = (
        math.log(draws.size) if given is None else float(_core.log_sum_exp(given[:, None])[0])
    )
    raw = np.empty_like(total)
    log_mean = _core.normalise(total, raw) - base_sum
    np.exp(raw, out=raw)
    efficiency = relative_efficiency(raw, draws, base.ordered)
    logs = np.empty_like(total)
    shape = _core.smooth(total, efficiency, logs)
    return Nodes(
        base,
        own,
        np.exp(logs),
        raw,
        log_mean,
        shape,
        _core.effective_size(logs, False),
        _core.effective_size(logs, True),
        _core.largest_share(logs),
    )


def weight_findings(nodes: Nodes) -> list[Finding]:
    """What the weights say of trust, as `weighing.trust` says it of one answer; figures (B,)."""
    base, count = nodes.base, nodes.base.draws.size
    pooling = base.draws.pooling
    with np.errstate(divide="ignore"):
        divergence = np.log(count / nodes.entropy_size)
    shares = np.array([tail_share(nodes.raw[:, j]) for j in range(nodes.count)])
    weighs = ~(shares < _IDLE_TAIL)
    found = [
        judge("weight_shape", nodes.tail_shape, strained=shape_limit(count), spoken=weighs),
        judge("few_effective", nodes.effective_size),
        judge("few_effective_entropy", nodes.entropy_size),
        judge("few_carry", nodes.largest_share),
        judge("saturated_divergence", np.maximum(divergence, 0.0) / math.log(count)),
        *(() if pooling is None else (_spread(f, nodes.count) for f in pooling.findings)),
    ]
    if base.ordered:
        varying = np.ptp(nodes.raw, axis=0) > 0
        apart = [
            excursions(nodes.raw[:, j], base.draws) if varying[j] else math.inf
            for j in range(nodes.count)
        ]
        found.append(judge("autocorrelated_tail", np.array(apart)))
        if base.draws.chains > 1:
            equal = np.full(count, 1 / count)
            shares = chains_p_value(nodes.linear * count, equal, base.draws)
            found.append(judge("chain_share", shares))
    lost = (nodes.raw == 0).mean(axis=0)
    if lost.any():
        found.append(judge("draws_lost", lost, spoken=lost > 0))
    return found


def _spread(finding: Finding, count: int) -> Finding:
    """A finding about the base, said of every node."""
    return replace(finding, figure=np.full(count, float(finding.figure)))


def algebra_findings(base: Base, targets: Sequence[Target]) -> list[Finding]:
    """
    Preflight of every target, and supports that cannot be seen.

    One finding for each code and wording, spoken at the targets where it holds.
    """
    figures: dict[tuple[str, tuple[tuple[str, str], ...]], Array] = {}
    firsts: dict[Any, tuple[Finding, Any]] = {}
    for place, target in enumerate(targets):
        for finding in (*preflight(base, target), *_unknown_supports(target)):
            key = (finding.code, tuple(sorted(finding.words.items())))
            if key not in figures:
                figures[key] = np.full(len(targets), np.nan)
                firsts[key] = (finding, np.zeros(len(targets), dtype=np.bool_))
            figures[key][place] = float(np.max(finding.figure))
            firsts[key][1][place] = True
    return [
        Finding(first.code, figures[key], first.strained, first.refit, first.words, spoken)
        for key, (first, spoken) in firsts.items()
    ]


@dataclass(frozen=True, eq=False)
class NodeSeries:
    """Estimates of one column of a quantity at every node, ``(B,)`` each; `z` is ``(n, B)``."""

    value: Array
    series: Series
    variance: Array
    inside: Array
    outside: Array
    z: Array


def study_nodes(
    nodes: Nodes, f: Array, *, shift: bool = False, is_event: bool = False
) -> NodeSeries:
    """
    Weighted means of `f` ``(n,)`` at every node, or their differences from the base.

    For an event the effective draws on both of its sides are counted as well.

    Errors and tail shapes are those of `answers.estimating`: of ``S w (f − μ)``, for a difference
    of ``S w (f − μ₁) − S v (f − μ₀)``.
    """
    base, count = nodes.base, nodes.base.draws.size
    draws, v = base.draws, nodes.own.linear
    at_base = float(_core.weighted_mean(f[:, None], v)[0])
    # Centring first loses no digits where the quantity varies little about a large value.
    centred = f - at_base
    moved = (nodes.linear * centred[:, None]).sum(axis=0)
    psi = centred[:, None] - moved
    z = count * nodes.linear * psi
    z_raw = count * nodes.raw * psi
    if shift:
        moved = moved - float(_core.weighted_mean(centred[:, None], v)[0])
        own = count * (v * centred)[:, None]
        z, z_raw = z - own, z_raw - count * (nodes.own.raw * centred)[:, None]
        # A change whose ratio is the same at every draw moves nothing, rounding or not.
        still = np.ptp(nodes.raw, axis=0) == 0 if base.log_weights is None else np.zeros(1, bool)
        moved, z, z_raw = (np.where(still, 0.0, figure) for figure in (moved, z, z_raw))
        variance = _core.mean_square(z)
        equal = np.full(count, 1 / count)
        p = chains_p_value(z, equal, draws) if base.ordered else np.ones(nodes.count)
    else:
        variance = (nodes.linear * psi**2).sum(axis=0)
        p = _chains(psi, nodes.linear, draws) if base.ordered else np.ones(nodes.count)
    of_f = float(relative_efficiency(centred[:, None], draws, base.ordered)[0])
    efficiency = relative_efficiency(z_raw, draws, base.ordered)
    series = Series(
        standard_error(z, draws, base.ordered),
        tail_of(z_raw, efficiency, draws, base.ordered),
        p,
        np.full(nodes.count, of_f),
        contributions_of(z, efficiency, draws, base.ordered),
    )
    sides = (f, 1 - f) if is_event else ()
    within = [_within(nodes.linear, side) * of_f for side in sides] or [np.empty(nodes.count)] * 2
    value = moved if shift else at_base + moved
    return NodeSeries(value, series, variance, within[0], within[1], carried(z, draws))


def _within(weights: Array, side: Array) -> Array:
    total = (weights * side[:, None]).sum(axis=0)
    squares = (weights**2 * side[:, None]).sum(axis=0)
    return np.where(squares > 0, total**2 / np.where(squares > 0, squares, 1.0), 0.0)


def _chains(psi: Array, weights: Array, draws: Draws) -> Array:
    """`weighing.series.chains_p_value` with weights of their own for every column."""
    if draws.pooling is not None:
        each = range(psi.shape[1])
        return np.array([chains_p_value(psi[:, [j]], weights[:, j], draws)[0] for j in each])
    if draws.chains < 2 or int(np.diff(draws.starts).min()) < _SHORTEST:
        return np.ones(psi.shape[1])
    pooled = (weights * psi**2).sum(axis=0)
    rounding = (1e-10 * np.abs(psi).max(axis=0)) ** 2
    mu, precision, freedom, held = [], [], [], np.ones(psi.shape[1], dtype=np.bool_)
    for start, stop in pairwise(draws.starts.tolist()):
        mass = weights[start:stop].sum(axis=0)
        held &= mass > 0
        w = weights[start:stop] / np.where(mass > 0, mass, 1.0)
        f, length = psi[start:stop], stop - start
        centre = (w * f).sum(axis=0)
        lrv = _core.long_run_variance(
            length * w * (f - centre), np.array([0, length], dtype=np.int64), True
        )
        least = np.maximum(pooled * (w**2).sum(axis=0), rounding)
        variance = np.maximum(lrv / length, least)
        safe = np.where(variance > 0, variance, 1.0)
        mu.append(centre)
        precision.append(np.where(variance > 0, 1 / safe, 0.0))
        effective = np.where(variance > 0, pooled / safe, float(length))
        freedom.append(np.maximum(effective / _FREEDOM, 1.0))
    enough = np.median(np.array(freedom), axis=0) * _FREEDOM >= _FEWEST
    p = np.where(enough, _welch(np.array(mu), np.array(precision), np.array(freedom)), 1.0)
    for j in np.flatnonzero(~held):
        # A chain without weight is left out of the test of this node.
        p[j] = chains_p_value(psi[:, j : j + 1], weights[:, j], draws)[0]
    return np.asarray(p, dtype=np.float64)
