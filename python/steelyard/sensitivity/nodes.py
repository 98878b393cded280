"""Many changes of one base at once: their weights stand side by side, and are studied in blocks."""

from __future__ import annotations

import math
from collections.abc import Iterator, Sequence
from dataclasses import dataclass, replace
from functools import cached_property

import numpy as np
import numpy.typing as npt

from steelyard import _core
from steelyard.answers.quantities import Quantity
from steelyard.arrays import in_unit
from steelyard.base import Base
from steelyard.base.draws import Array
from steelyard.sensitivity import plain_nodes
from steelyard.verdicts import Finding, judge
from steelyard.weighing.series import relative_efficiency
from steelyard.weighing.trust import figure_findings
from steelyard.weighing.weigh import Weights, base_weights, weigh_ratio

__all__ = ["Columns", "Figures", "Study", "node_blocks", "own_weights", "weight_findings"]

# Values of log ratios that are held at a time, and the most nodes that they may be of.
_HELD = 1 << 20
_MOST = 256


def node_blocks(count: int, draws: int) -> Iterator[slice]:
    """Blocks of nodes, so that the weights of all are never held."""
    width = min(max(_HELD // draws, 1), _MOST)
    for start in range(0, count, width):
        yield slice(start, min(start + width, count))


def own_weights(base: Base) -> Weights:
    """Weights of the base as a shift needs them: smoothed by the same function as the target's."""
    if base.log_weights is None:
        return base_weights(base)
    zero = np.zeros(base.draws.size)
    return weigh_ratio(zero, base.log_weights, base.draws, ordered=base.ordered)


@dataclass(frozen=True, eq=False)
class Columns:
    """
    Columns of quantities, one row each, with their base mean taken off.

    Attributes
    ----------
    rows : numpy.ndarray
        ``(q, n)``, in the unit of `in_unit`.
    centre, unit : numpy.ndarray
        Base means and units.
    events : numpy.ndarray
        The base mean of a column that is an event; NaN for the others.
    efficiency : numpy.ndarray
        Of the base draws for each column.
    """

    rows: Array
    centre: Array
    unit: Array
    events: Array
    efficiency: Array

    @classmethod
    def none(cls, base: Base) -> Columns:
        """No columns, where only the weights are asked for."""
        return cls(np.empty((0, base.draws.size)), *(np.empty(0) for _ in range(4)))

    @classmethod
    def of(cls, quantities: Sequence[Quantity], base: Base, own: Weights) -> Columns:
        """All columns of several quantities."""
        columns = np.concatenate([q.columns for q in quantities], axis=1)
        is_event = np.concatenate([np.full(q.columns.shape[1], q.is_event) for q in quantities])
        f, unit = in_unit(columns)
        centre = _core.weighted_mean(np.ascontiguousarray(f), own.linear)
        # Centring first loses no digits where a quantity varies little about a large value.
        rows = np.ascontiguousarray((f - centre).T)
        efficiency = relative_efficiency(rows.T, base.draws, base.ordered)
        return cls(rows, centre, unit, np.where(is_event, centre, np.nan), efficiency)


@dataclass(frozen=True, eq=False)
class Figures:
    """
    What a block of nodes shows, as the kernel lays it out.

    Attributes
    ----------
    about : numpy.ndarray
        Figures of the weights ``(B, 10)``.
    value, shift : numpy.ndarray
        Figures of the weighted means ``(B, q, 9)``, and of their differences from the base.
    sums : numpy.ndarray
        Sums of the last of these series over batches, ``(B, q, batches)``.
    weights : numpy.ndarray or None
        Smoothed weights ``(B, n)``, where they are wanted.
    """

    about: Array
    value: Array
    shift: Array | None
    sums: Array
    weights: Array | None


@dataclass(frozen=True, eq=False)
class Study:
    """What is asked of every node: columns, and whether their shifts and the weights too."""

    base: Base
    own: Weights
    columns: Columns
    edges: npt.NDArray[np.int64]
    shift: bool = False
    keep: bool = False

    def of(self, ratios: Array) -> Figures:
        """Everything about nodes with log ratios ``(B, n)``."""
        base, given = self.base, self.base.log_weights
        total = ratios if base.reference is None else ratios + base.reference
        found, weights = self._studied(np.ascontiguousarray(total))
        if given is not None and not base.is_approximate:
            # Without a change the weights are the given ones, which are left as they are.
            for place in np.flatnonzero(~ratios.any(axis=1)):
                kept = None if weights is None else weights[place : place + 1]
                one = total[place : place + 1]
                found[place] = plain_nodes.study(self, one, kept, smooth=False)[0]
        about = found[:, : plain_nodes.ABOUT]
        about[:, 0] -= (
            math.log(base.draws.size)
            if given is None
            else float(_core.log_sum_exp(given[:, None])[0])
        )
        series = plain_nodes.SERIES
        width = series * (2 if self.shift else 1) + len(self.edges) - 1
        shape = (len(found), len(self.columns.rows), width)
        rest = found[:, plain_nodes.ABOUT :].reshape(shape)
        shift = rest[:, :, series : 2 * series] if self.shift else None
        if shift is not None:
            # Effective draws on the sides of an event are those of its probability.
            shift[:, :, 7:] = rest[:, :, 7:series]
        sums = rest[:, :, series * (2 if self.shift else 1) :]
        return Figures(about, rest[:, :, :series], shift, sums, weights)

    def _studied(self, total: Array) -> tuple[Array, Array | None]:
        draws, ordered = self.base.draws, self.base.ordered
        weights = np.empty_like(total) if self.keep else None
        if draws.pooling is not None or (not ordered and draws.repeats is not None):
            # Repeated draws are taken together, fits of a pool apart: the kernel does neither.
            return plain_nodes.study(self, total, weights), weights
        found = _core.study_nodes(
            total,
            self.columns.rows,
            self.columns.events,
            self._own_pair,
            self.base.log_weights is None,
            draws.starts,
            ordered,
            self.edges,
            self.shift,
            weights,
        )
        return found, weights

    @cached_property
    def _own_pair(self) -> Array:
        return np.stack([self.own.linear, self.own.raw])


def weight_findings(about: Array, base: Base) -> list[Finding]:
    """What the weights say of trust, as `weighing.trust` says it of one answer; figures (B,)."""
    count = base.draws.size
    shape, size, entropy, largest, tail, apart, share, lost = about[:, 1:9].T
    with np.errstate(divide="ignore"):
        divergence = np.log(count / entropy)
    divergence = np.maximum(divergence, 0.0) / math.log(count)
    found = figure_findings(count, shape, (size, entropy), largest, divergence, tail)
    if base.draws.pooling is not None:
        found += [_of_every_node(f, len(about)) for f in base.draws.pooling.findings]
    if base.ordered:
        found.append(judge("autocorrelated_tail", apart))
        if base.draws.chains > 1:
            found.append(judge("chain_share", share))
    if lost.any():
        found.append(judge("draws_lost", lost, spoken=lost > 0))
    return found


def _of_every_node(finding: Finding, count: int) -> Finding:
    """A finding about the base, said of every node."""
    return replace(finding, figure=np.full(count, float(finding.figure)))
