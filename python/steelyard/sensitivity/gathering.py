"""Figures of a quantity over many nodes, filled block by block, and one Estimate made of them."""

from __future__ import annotations

from collections.abc import Sequence
from dataclasses import dataclass, replace
from typing import Any

import numpy as np

from steelyard.answers.estimate import Estimate
from steelyard.answers.estimating import Scale, Series, finish
from steelyard.answers.quantities import Quantity
from steelyard.base import Base
from steelyard.base.draws import Array
from steelyard.sensitivity.nodes import Columns
from steelyard.sensitivity.plain_nodes import SERIES
from steelyard.verdicts import Finding, judge
from steelyard.weighing.series import degrees_of
from steelyard.weighing.weigh import Weights

__all__ = ["Gathered", "Shared"]


@dataclass(frozen=True, eq=False)
class Shared:
    """What the estimates of all quantities share: base, weights, and the axes of the nodes."""

    base: Base
    own: Weights
    effective_size: Array
    findings: Sequence[Finding]
    lead: tuple[int, ...]
    labels: dict[str, Any]


@dataclass
class Gathered:
    """Figures of one quantity over all nodes ``(B, k, 9)``; `place` are its columns."""

    quantity: Quantity
    place: slice
    figures: Array
    is_shift: bool = False

    @classmethod
    def empty(
        cls, quantities: Sequence[Quantity], count: int, *, is_shift: bool = False
    ) -> list[Gathered]:
        """Room for so many nodes of each quantity."""
        found, start = [], 0
        for quantity in quantities:
            width = quantity.columns.shape[1]
            figures = np.empty((count, width, SERIES))
            found.append(cls(quantity, slice(start, start + width), figures, is_shift))
            start += width
        return found

    def put(self, part: slice, figures: Array) -> None:
        """Keep what a block of nodes shows of all columns, ``(B, q, 9)``."""
        self.figures[part] = figures[:, self.place]

    def cut(self, count: int) -> Gathered:
        """The first nodes, where not all that there was room for were answered."""
        return replace(self, figures=self.figures[:count])

    def finished(self, columns: Columns, shared: Shared) -> Estimate:
        """One Estimate over all nodes, axes of the nodes first."""
        base, place = shared.base, self.place
        unit, of_f = columns.unit[place], columns.efficiency[place]
        value, variance, p, long_run, efficiency, shape, carried, inside, outside = (
            self.figures[:, :, i] for i in range(SERIES)
        )
        if not self.is_shift:
            value = columns.centre[place] + value
        error = np.sqrt(long_run / base.draws.size)
        carried = np.sqrt(efficiency) * carried
        degrees = degrees_of(carried, efficiency, base.draws)
        spread = np.broadcast_to(of_f, value.shape)
        extra: tuple[Finding, ...] = ()
        if self.quantity.is_event:
            extra = tuple(
                judge("event_draws", (side * of_f).reshape(-1), side=name)
                for name, side in (("inside", inside), ("outside", outside))
            )
            # Without a draw on one side there is no probability: a zero would be a claim.
            settled = (inside > 0) & (outside > 0)
            value, error = (np.where(settled, a, np.nan) for a in (value, error))
        figures = (error * unit, shape, p, spread, carried, degrees)
        trailing = (1,) * len(self.quantity.shape)
        findings = tuple(_in_shape(f, (*shared.lead, *trailing)) for f in shared.findings)
        # `finish` asks its weights for nothing but the effective size, here one a node.
        weights: Any = _Sizes(np.repeat(shared.effective_size, value.shape[1]))
        return finish(
            Scale(base, weights, shared.own, findings),
            self.quantity,
            (value * unit).reshape(-1),
            Series(*(a.reshape(-1) for a in figures)),
            (np.sqrt(variance) * unit).reshape(-1),
            lead=shared.lead,
            extra=extra,
            lead_labels=shared.labels,
            whole=not self.is_shift and not self.quantity.is_event,
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
