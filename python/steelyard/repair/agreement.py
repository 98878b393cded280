"""Whether pooled fits overlap, and whether their draws agree with their stated terms."""

from __future__ import annotations

from collections.abc import Sequence
from dataclasses import replace

import numpy as np

from steelyard import _core
from steelyard.base import Draws
from steelyard.base.draws import Array
from steelyard.base.pooling import Pooling
from steelyard.repair.multi_sample import solve
from steelyard.rules import RULES
from steelyard.weighing.series import long_run_variance

__all__ = ["contradictions", "linked"]

# Parameters whose means are compared, the first so many.
_MOST_COLUMNS = 20
# Standardised values are cut here: the comparison needs all its moments.
_CUT = 3.0
# Smallest share of a fit's draws that must lie among the others' to be compared.
_LEAST_SHARED = 1.0


def linked(pooling: Pooling) -> Array:
    """
    Effective draws that link each fit to the first, by the best way through the others.

    Two fits share ``Σ c P_j P_k`` draws: one over it is the variance of their log ratio of
    constants, up to what their sizes take off. A chain is as strong as its weakest link.
    """
    shared = pooling.shared_draws
    count = len(shared)
    best = np.zeros(count)
    best[0] = np.inf
    waiting = set(range(count))
    while waiting:
        nearest = max(waiting, key=lambda fit: (best[fit], -fit))
        waiting.remove(nearest)
        for other in waiting:
            best[other] = max(best[other], min(best[nearest], shared[nearest, other]))
    return best


def contradictions(
    pooling: Pooling,
    draws: Draws,
    sizes: Array,
    labels: Sequence[str],
    log_q: Array,
    given: Array | None,
) -> list[tuple[str, float]]:
    """
    Fits whose draws are not distributed as the densities of all say, with p-values, worst first.

    For any function h the draws of a fit and those of the others must agree about
    ``∫ h p_k (mixture of the others)/(mixture of all)``: ``Σ_{x∈k} c (1 − P_k) h = Σ_{x∉k} c P_k
    h``. The worst fit is taken out and the others are compared again; of two, both are named.
    """
    limit = RULES["pool_contradiction"].strained
    p = _p_values(pooling, draws, sizes)
    worst = int(np.argmin(p))
    if not p[worst] < limit:
        return []
    if len(labels) == 2:
        return [(f"{labels[0]} or {labels[1]}", float(p[worst]))]
    named = [(labels[worst], float(p[worst]))]
    kept = [fit for fit in range(len(labels)) if fit != worst]
    rest = _without(pooling, draws, sizes, log_q, given, kept)
    rest_labels = [labels[fit] for fit in kept]
    return named + contradictions(*rest[:3], rest_labels, rest[3], rest[4])


def _without(
    pooling: Pooling,
    draws: Draws,
    sizes: Array,
    log_q: Array,
    given: Array | None,
    kept: list[int],
) -> tuple[Pooling, Draws, Array, Array, Array | None]:
    """The same pool without one of its fits."""
    rows = np.concatenate([np.arange(pooling.edges[f], pooling.edges[f + 1]) for f in kept])
    lengths = np.diff(pooling.edges)[kept]
    edges = np.concatenate([[0], np.cumsum(lengths)]).astype(np.int64)
    values = np.ascontiguousarray(log_q[rows][:, kept])
    known = None if given is None else given[kept] - given[kept[0]]
    again, _ = solve(values, edges, pooling.own[rows], sizes[kept], known)
    again = replace(again, ordered=tuple(pooling.ordered[fit] for fit in kept))
    part = replace(draws.take(rows), pooling=again)
    return again, part, sizes[kept], values, known


def _p_values(pooling: Pooling, draws: Draws, sizes: Array) -> Array:
    """One p-value a fit: the smallest over the functions compared, times their number."""
    functions = _functions(pooling, draws)
    edges, shares, counts = pooling.edges, pooling.shares, pooling.counts
    p = np.ones(len(sizes))
    for fit in range(len(sizes)):
        inside = np.zeros(draws.size)
        inside[edges[fit] : edges[fit + 1]] = 1.0
        h = np.concatenate([functions, shares[:, [fit]]], axis=1)
        balance = (counts * (inside - shares[:, fit]))[:, None] * h
        # How the sums hang on the constants: ∂P_k/∂f_j = P_k (1{j = k} − P_j).
        weighted = (counts * shares[:, fit])[:, None] * h
        slope = shares.T @ weighted
        slope[fit] -= weighted.sum(axis=0)
        series = draws.size * balance
        series = pooling.centred(series) + pooling.constants @ slope
        lrv = long_run_variance(series, draws, True)
        error = np.sqrt(lrv / draws.size)
        shared = float((counts * shares[:, fit] * (1 - shares[:, fit])).sum())
        known = (error > 1e-9 * np.abs(weighted).sum(axis=0)) & (shared > _LEAST_SHARED)
        t = np.where(known, balance.sum(axis=0) / np.where(known, error, 1.0), 0.0)
        freedom = np.full(len(t), max(float(sizes.min()) / 3, 1.0))
        tested = max(int(known.sum()), 1)
        p[fit] = min(1.0, tested * float(_core.f_tail(t**2, 1.0, freedom).min()))
    return np.minimum(p * len(sizes), 1.0)


def _functions(pooling: Pooling, draws: Draws) -> Array:
    """One, and the parameters standardised over the pool and cut."""
    held = [values.reshape(draws.size, -1) for values in draws.values()]
    columns = np.concatenate(held, axis=1)[:, :_MOST_COLUMNS] if held else np.empty((draws.size, 0))
    weights = pooling.counts / pooling.counts.sum()
    mean = weights @ columns
    sd = np.sqrt(weights @ (columns - mean) ** 2)
    columns = np.clip((columns - mean) / np.where(sd > 0, sd, 1.0), -_CUT, _CUT)
    return np.concatenate([np.ones((draws.size, 1)), columns], axis=1)
