"""What pools of a base and refits give each scenario, as the base draws predict it."""

from __future__ import annotations

import math
from collections.abc import Sequence
from dataclasses import replace

import numpy as np
import numpy.typing as npt

from steelyard.answers.bands import batch_edges
from steelyard.answers.estimate import Estimate
from steelyard.answers.estimating import MANY
from steelyard.base import Base
from steelyard.base.draws import Array
from steelyard.changes import Target
from steelyard.planning.shares import best_shares, costs_of
from steelyard.sensitivity.nodes import Columns, Study, own_weights, weight_findings
from steelyard.sensitivity.targets import Targets
from steelyard.verdicts import Finding, Verdict, judge
from steelyard.weighing.series import (
    contributions_of,
    relative_efficiency,
    standard_error,
    tail_of,
)

__all__ = ["BASE", "Problem"]

# What the fit at hand is called among the shares.
BASE = "base"


class Problem:
    """Weights of all scenarios under the base, and what a pool of some of them gives the others."""

    def __init__(self, base: Base, names: tuple[str, ...], targets: list[Target]) -> None:
        self.base, self.names = base, names
        ratios = np.stack([target.log_ratio for target in targets])
        own = own_weights(base)
        study = Study(base, own, Columns.none(base), batch_edges(base.draws), keep=True)
        found = study.of(ratios)
        assert found.weights is not None
        self.findings = [*weight_findings(found.about, base), *Targets(base).findings(targets)]
        ranks = np.full(len(names), 2)
        for finding in self.findings:
            ranks = np.minimum(ranks, finding.rank)
        self.far = ranks == 0
        # Draws at hand are what they are, whatever they weigh: equal, or as a pool counts them.
        pooling = base.draws.pooling
        counts = np.ones(base.draws.size) if pooling is None else pooling.counts
        self.weights = np.concatenate([(counts / counts.sum())[:, None], found.weights.T], axis=1)
        # A scenario out of reach is served by its own refit alone, and serves no other: it lives
        # on a draw of its own.
        count = len(names)
        known = np.where(np.concatenate([[False], self.far]), 0.0, self.weights)
        private = np.concatenate([np.zeros((count, 1)), np.diag(self.far.astype(float))], axis=1)
        self.rows = np.concatenate([known, private])

    def shares(self, chosen: Sequence[int]) -> tuple[Array, Array]:
        """Best shares of the base and the chosen refits, and the efficiencies they give."""
        columns = [0, *(1 + place for place in chosen)]
        shares, costs = best_shares(self.rows[:, 1:] ** 2, self.rows[:, columns])
        return shares, 1 / costs

    def equal(self, chosen: Sequence[int]) -> Array:
        """Efficiencies with equal shares, for a first look."""
        held = np.zeros(self.rows.shape[1])
        held[[0, *(1 + place for place in chosen)]] = 1 / (1 + len(chosen))
        return 1 / costs_of(self.rows[:, 1:] ** 2, self.rows, held)

    def between(self) -> Array:
        """Efficiency of each scenario from the base and from each other one alone."""
        count = self.weights.shape[1]
        squares = self.weights[:, 1:] ** 2
        return np.stack([1 / costs_of(squares, self.weights, e) for e in np.eye(count)])

    def broadest(self) -> str:
        """
        The base that serves the worst served scenario best.

        Where scenarios are out of reach little can be seen from here: then the one that spreads
        the draws most, if that is more than now; else the most spread of those out of reach.
        """
        if self.far.any():
            spreads = np.array([self._spread(column) for column in range(len(self.names) + 1)])
            wider = spreads[1:] > spreads[0]
            held = np.flatnonzero(wider if wider.any() else self.far)
            return self.names[int(held[np.argmax(spreads[1:][held])])]
        row = int(np.argmax(self.between().min(axis=1)))
        return BASE if row == 0 else self.names[row - 1]

    def _spread(self, column: int) -> float:
        draws, w = self.base.draws, self.weights[:, column]
        held = [draws[name].reshape(draws.size, -1) for name in self.base.parameters]
        columns = np.concatenate(held, axis=1)
        variance = w @ (columns - w @ columns) ** 2
        return float(np.log(np.maximum(variance, 1e-300)).sum())

    def estimate(self, held: Array, refitted: Sequence[int]) -> Estimate:
        """Efficiencies from a pool with these shares, with errors and verdicts."""
        draws, ordered = self.base.draws, self.base.ordered
        own = np.zeros(len(self.names), dtype=np.bool_)
        own[list(refitted)] = True
        bounded = own & self.far
        rows = np.where(np.concatenate([[False], self.far]) & (held > 0), 0.0, self.weights)
        mixture = rows @ held
        safe = np.where(mixture > 0, mixture, np.inf)
        w = self.weights[:, 1:]
        h = w**2 / safe[:, None]
        total = h.sum(axis=0)
        # The draws weigh in h, in w itself and in the mixture: the derivative has a part for each.
        use = rows.T @ (h / safe[:, None])
        z = draws.size * (h - 2 * total * w + rows @ (held[:, None] * use))
        efficiency = relative_efficiency(z, draws, ordered)
        some = np.where(total > 0, total, np.nan)
        error = np.where(total > 0, standard_error(z, draws, ordered) / some**2, math.inf)
        value = np.where(bounded, held[1:], 1 / some)
        shape = tail_of(z, efficiency, draws, ordered)
        findings = [_spoken_but(finding, bounded) for finding in self.findings]
        carried = contributions_of(z, efficiency, draws, ordered)
        heavy = judge("quantity_shape", shape, spoken=~(carried >= MANY))
        findings.append(_spoken_but(heavy, bounded))
        labels = {"scenario": np.array(self.names, dtype=object)}
        return Estimate(
            value,
            np.where(bounded, 0.0, error),
            np.where(bounded, -math.inf, shape),
            Verdict(findings, value.shape),
            np.full(value.shape, math.nan),
            label="efficiency",
            dims=("scenario",),
            labels=labels,
        )


def _spoken_but(finding: Finding, silent: npt.NDArray[np.bool_]) -> Finding:
    """A finding that says nothing of some scenarios: they rest on no prediction."""
    spoken = ~silent if finding.spoken is None else finding.spoken & ~silent
    figure = np.broadcast_to(finding.figure, silent.shape)
    return replace(finding, figure=figure, spoken=np.broadcast_to(spoken, silent.shape))
