"""Figures of a quantity over many nodes, filled block by block, and one Estimate made of them."""

from __future__ import annotations

from collections.abc import Sequence
from dataclasses import dataclass
from typing import Any

import numpy as np

from steelyard.answers.estimate import Estimate
from steelyard.answers.estimating import Scale, Series, finish
from steelyard.answers.quantities import Quantity
from steelyard.base import Base
from steelyard.base.draws import Array
from steelyard.sensitivity.nodes import NodeSeries
from steelyard.verdicts import Finding, judge
from steelyard.weighing.weigh import Weights

__all__ = ["Gathered"]


@dataclass
class Gathered:
    """Figures of one quantity over all nodes ``(B, k)``, filled block by block."""

    quantity: Quantity
    value: Array
    error: Array
    shape: Array
    p_value: Array
    efficiency: Array
    spread: Array
    inside: Array
    outside: Array
    contributions: Array

    @classmethod
    def empty(cls, quantity: Quantity, count: int) -> Gathered:
        """Room for so many nodes."""
        width = quantity.columns.shape[1]
        return cls(quantity, *(np.empty((count, width)) for _ in range(9)))

    def put(self, part: slice, column: int, found: NodeSeries) -> None:
        """Keep what a block of nodes shows of one column."""
        series = found.series
        known = series.contributions
        figures = (
            (self.value, found.value),
            (self.error, series.error),
            (self.shape, series.shape),
            (self.p_value, series.p_value),
            (self.efficiency, series.efficiency),
            (self.spread, found.spread),
            (self.inside, found.inside),
            (self.outside, found.outside),
            (self.contributions, np.inf if known is None else known),
        )
        for room, figure in figures:
            room[part, column] = figure

    def finished(
        self,
        base: Base,
        own: Weights,
        effective_size: Array,
        findings: Sequence[Finding],
        lead: tuple[int, ...],
        lead_labels: dict[str, Any],
    ) -> Estimate:
        """One Estimate over all nodes, axes of the nodes first."""
        trailing = (1,) * len(self.quantity.shape)
        shared = tuple(_in_shape(f, (*lead, *trailing)) for f in findings)
        width = self.value.shape[1]
        # `finish` asks its weights for nothing but the effective size, here one a node.
        weights: Any = _Sizes(np.repeat(effective_size, width))
        scale = Scale(base, weights, own, shared)
        figures = (self.error, self.shape, self.p_value, self.efficiency, self.contributions)
        series = Series(*(a.reshape(-1) for a in figures))
        extra: tuple[Finding, ...] = ()
        if self.quantity.is_event:
            extra = (
                judge("event_draws", self.inside.reshape(-1), side="inside"),
                judge("event_draws", self.outside.reshape(-1), side="outside"),
            )
        return finish(
            scale,
            self.quantity,
            self.value.reshape(-1),
            series,
            self.spread.reshape(-1),
            lead=lead,
            extra=extra,
            lead_labels=lead_labels,
        )


@dataclass(frozen=True)
class _Sizes:
    effective_size: Array


def _in_shape(finding: Finding, shape: tuple[int, ...]) -> Finding:
    """A finding over flat nodes, or over all of them, in the shape of the nodes."""

    def put(values: Any) -> Any:
        return values.reshape(shape) if values.ndim else values

    spoken = None if finding.spoken is None else put(finding.spoken)
    return Finding(
        finding.code, put(finding.figure), finding.strained, finding.refit, finding.words, spoken
    )
