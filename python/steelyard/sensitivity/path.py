"""A decision along one hyperparameter, reweighed only where it is asked and never twice."""

from __future__ import annotations

import math
from collections.abc import Sequence
from dataclasses import dataclass, field
from functools import cached_property
from typing import Any

import numpy as np

from steelyard import _core
from steelyard.answers.bands import batch_edges
from steelyard.answers.estimate import Estimate
from steelyard.answers.quantities import Quantity, event_mask
from steelyard.answers.student import student_quantile
from steelyard.base import Base
from steelyard.base.draws import Array
from steelyard.sensitivity.families import Family, members, refuse_withheld
from steelyard.sensitivity.gathering import Gathered, Shared
from steelyard.sensitivity.nodes import Columns, Study, weight_findings
from steelyard.sensitivity.targets import Formed, Targets
from steelyard.verdicts import judge
from steelyard.weighing.weigh import Weights

__all__ = ["MOST_REWEIGHINGS", "Path", "Place"]

MOST_REWEIGHINGS = 60
# Kept for slopes at crossings, a place on each, and the probability at the nearest.
_RESERVED = 4


@dataclass(frozen=True)
class Place:
    """The decision at one value: probability minus level, its error, and whether it is sound."""

    at: float
    gap: float
    error: float
    is_sound: bool
    effective_size: float
    degrees: float = math.inf

    @property
    def deviation(self) -> float:
        """The gap in errors, those of few degrees of freedom counted as wider ones."""
        if self.error > 0:
            wider = float(student_quantile(0.95, self.degrees)) / float(
                student_quantile(0.95, math.inf)
            )
            return self.gap / (self.error * wider)
        return math.copysign(math.inf, self.gap) if self.gap else 0.0


@dataclass
class Path:
    """
    Places along a family of changes; `steps` are positions in which the path is even.

    Positions are logs of the hyperparameter where the range is positive and wide, else the
    hyperparameter itself.
    """

    base: Base
    family: Family
    name: str
    asked: Any
    event: Quantity
    level: float
    between: tuple[float, float]
    own: Weights
    places: dict[float, Place] = field(default_factory=dict)
    # Reweighings made so far, those at places visited before among them.
    spent: int = 0

    @cached_property
    def targets(self) -> Targets:
        """What was learnt of single densities, kept for the whole path."""
        return Targets(self.base)

    @cached_property
    def study(self) -> Study:
        """What is asked at every value."""
        columns = Columns.of([self.event], self.base, self.own)
        return Study(self.base, self.own, columns, batch_edges(self.base.draws), keep=True)

    @property
    def is_log(self) -> bool:
        """Whether steps are even on the log scale."""
        low, high = self.between
        return low > 0 and high / low >= 10

    def step(self, at: float) -> float:
        """Position of a value."""
        return math.log(at) if self.is_log else at

    def value(self, step: float) -> float:
        """Value of a position, inside the range to the last bit."""
        at = math.exp(step) if self.is_log else step
        return min(max(at, self.between[0]), self.between[1])

    @property
    def left(self) -> int:
        """Reweighings that may still be made on the search."""
        return MOST_REWEIGHINGS - _RESERVED - self.spent

    def visit(self, values: Sequence[float]) -> list[Place]:
        """The decision at several values, new ones reweighed together."""
        new = [v for v in dict.fromkeys(values) if v not in self.places]
        if new:
            self._reweigh(new)
        return [self.places[v] for v in values]

    def _reweigh(self, values: list[float]) -> None:
        estimate, sizes = self._estimate(values)
        for i, at in enumerate(values):
            # NaN where no draw with weight lies on one side: beyond what can be said.
            gap, error = (float(np.ravel(a[i])[0]) for a in (estimate.value, estimate.error))
            sound = bool(np.ravel(estimate.verdict.is_sound[i])[0])
            degrees = float(np.ravel(estimate.degrees[i])[0])
            self.places[at] = Place(at, gap - self.level, error, sound, float(sizes[i]), degrees)

    def _estimate(self, values: list[float]) -> tuple[Estimate, Array]:
        formed = self._formed(values)
        self.spent += len(values)
        found = self.study.of(formed.ratios)
        (gathered,) = Gathered.empty([self.event], len(values))
        gathered.put(slice(0, len(values)), found.value)
        findings = [
            *self.targets.findings(formed.made),
            *weight_findings(found.about, self.base),
            judge("base_unverified"),
        ]
        labels = {self.name: np.array(values)}
        sizes = found.about[:, 2]
        shared = Shared(self.base, self.own, sizes, findings, (len(values),), labels)
        return gathered.finished(self.study.columns, shared), sizes

    def _formed(self, values: Sequence[float]) -> Formed:
        formed = members(self.targets, self.family, [self.name], [(v,) for v in values])
        # An event of predictive draws whose model changed is refused here.
        refuse_withheld(formed, lambda base: event_mask(self.asked, base), self.base)
        return formed

    def probability(self, at: float) -> Estimate:
        """The probability at one value, with its verdict."""
        estimate, _ = self._estimate([at])
        verdict = estimate.verdict[0]
        while np.ndim(verdict.level):
            verdict = verdict[0]
        value, error, shape, effective = (
            float(np.ravel(figure)[0])
            for figure in (
                estimate.value,
                estimate.error,
                estimate.tail_shape,
                estimate.effective_draws,
            )
        )
        return Estimate(
            value,
            error,
            shape,
            verdict,
            effective,
            degrees=float(np.ravel(estimate.degrees)[0]),
            label=self.event.label,
        )

    def slope(self, at: float, one: Place, other: Place) -> float:
        """
        ``Cov(1{event}, ∂ℓ/∂λ)`` under the weights at `at`: how fast the probability moves.

        From the places beside it once only the last reweighing is left.
        """
        if self.spent >= MOST_REWEIGHINGS - 1:
            return (other.gap - one.gap) / (other.at - one.at)
        self.spent += 1
        low, high = self.between
        h = 1e-4 * (high - low)
        if self.is_log:
            h = 1e-4 * at
        before, after = max(at - h, low), min(at + h, high)
        ratios = self._formed([before, at, after]).ratios
        kept = self.study.of(ratios[1:2]).weights
        w = np.zeros(0) if kept is None else kept[0]
        with np.errstate(invalid="ignore"):
            score = (ratios[2] - ratios[0]) / (after - before)
        score = np.where(w > 0, np.nan_to_num(score), 0.0)
        f = self.event.columns[:, 0]
        centre = float(_core.weighted_mean(score[:, None], w)[0])
        return float(_core.weighted_mean((f * (score - centre))[:, None], w)[0])
