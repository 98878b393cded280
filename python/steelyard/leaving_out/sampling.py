"""Very many observations: a cheap surrogate for all, exact deletion for a random sample."""

from __future__ import annotations

import math
from dataclasses import dataclass
from typing import Any

import numpy as np

from steelyard import _core
from steelyard.arrays import Frozen, plain_array
from steelyard.base import Base
from steelyard.base.draws import Array
from steelyard.digits import short
from steelyard.errors import ArgumentError, ArgumentTypeError, ShapeError
from steelyard.leaving_out.deletion import Setting, log_ratio_of
from steelyard.leaving_out.groups import Groups, Positions
from steelyard.leaving_out.progress import Teller
from steelyard.weighing.arrays import seed_key

__all__ = ["Sampled", "Surrogate", "choose", "generator_of", "raw_surrogate", "surrogate_of"]


@dataclass(frozen=True, eq=False)
class Sampled(Frozen):
    """
    Which groups were left out exactly, and what stands in for the others.

    Attributes
    ----------
    size : int
        How many groups were drawn, without replacement.
    of : int
        How many there are.
    positions : numpy.ndarray
        Their flat positions, ascending.
    surrogate_total, surrogate_square : float
        Sums of the surrogate and of its square over all groups.
    surrogate : numpy.ndarray
        The surrogate of the groups drawn.
    error : float
        Standard error of the total that comes from drawing only some.
    """

    size: int
    of: int
    positions: Positions
    surrogate_total: float
    surrogate_square: float
    surrogate: Array
    error: float = math.nan

    def total(self, scores: Array) -> float:
        """
        The difference estimator of a total.

        Parameters
        ----------
        scores : numpy.ndarray
            Exact log scores of the groups drawn.

        Returns
        -------
        float
            ``Σ surrogate + N/n Σ (exact − surrogate)``.
        """
        gap = float((scores - self.surrogate).sum())
        return self.surrogate_total + self.of / self.size * gap

    def variance(self, scores: Array) -> float:
        """
        Variance of the scores over all groups, by the same estimator.

        Parameters
        ----------
        scores : numpy.ndarray
            Exact log scores of the groups drawn.

        Returns
        -------
        float
            Never below that of the groups drawn over their number.
        """
        square = self.surrogate_square + self.of / self.size * float(
            (scores**2 - self.surrogate**2).sum()
        )
        found = square / self.of - (self.total(scores) / self.of) ** 2
        return max(found, float(np.var(scores, ddof=1)) / self.size)

    def simple_total(self, values: Array) -> float:
        """
        The expansion estimator of a total.

        Parameters
        ----------
        values : numpy.ndarray
            Values of the groups drawn.

        Returns
        -------
        float
            ``N/n Σ values``.
        """
        return self.of / self.size * float(values.sum())

    def __str__(self) -> str:
        return (
            f"{self.size:,} of {self.of:,} groups drawn at random and left out, a surrogate for "
            f"the others: ± {short(float(f'{self.error:.2g}'))} from drawing"
        )


@dataclass(frozen=True, eq=False)
class Surrogate:
    """A surrogate of every group's log score, and the influence series of its sum."""

    values: Array
    series: Array


def generator_of(rng: Any) -> np.random.Generator:
    """A generator of its own, seeded from the caller's `rng`, which advances."""
    return np.random.default_rng(list(seed_key(rng)))


def choose(sample: object, count: int, generator: np.random.Generator) -> Positions:
    """A simple random sample of groups, ascending."""
    if isinstance(sample, bool) or not isinstance(sample, int | np.integer):
        raise ArgumentTypeError("sample", "an integer", repr(sample), "Say how many groups.")
    if not 2 <= sample <= count:
        raise ArgumentError(
            "sample",
            f"from 2 to the number of groups, {count}",
            str(sample),
            "Leave sample= out to take all of them.",
        )
    return np.sort(generator.choice(count, size=int(sample), replace=False)).astype(np.int64)


def surrogate_of(
    base: Base, groups: Groups, setting: Setting, given: object, tell: Teller
) -> Surrogate:
    """
    The given surrogate, or the score by raw weights, in one pass without any fit to a tail.

    ``−log Σ v exp(−L)``: next to the exact one wherever weights are light, and off where they are
    heavy in the same direction.

    References
    ----------
    .. [1] Magnusson, Vehtari, Jonasson, Andersen (2020), AISTATS; Gelfand, Dey, Chang (1992).
    """
    if given is not None:
        values = plain_array(given, "surrogate", "fiu").astype(np.float64)
        if values.shape != groups.shape:
            raise ShapeError(
                "surrogate",
                f"a log score for each group, shape {groups.shape}",
                str(values.shape),
                "Give one a group.",
            )
        if not np.isfinite(values).all():
            raise ArgumentError("surrogate", "finite values", "NaN or infinite ones", "Mend them.")
        return Surrogate(values.reshape(-1), np.zeros(base.draws.size))
    return raw_surrogate(groups, np.arange(groups.count), setting, tell)


def raw_surrogate(groups: Groups, chosen: Positions, setting: Setting, tell: Teller) -> Surrogate:
    """The score by raw weights of some groups."""
    values, series = np.empty(len(chosen)), np.zeros(setting.draws.size)
    for part, held, scored in groups.blocks(setting.draws, chosen):
        values[part], block = _cheap(setting, held, scored)
        series += block
        tell(part.stop)
    return Surrogate(values, series)


def _cheap(setting: Setting, held: Array, scored: Array) -> tuple[Array, Array]:
    """Scores by raw weights, and the influence series of their sum."""
    log_weights = log_ratio_of(setting, held)
    total = _core.log_sum_exp(log_weights)
    joint = log_weights + scored
    level = _core.log_sum_exp(joint)
    z = np.exp(joint - level) - np.exp(log_weights - total)
    return level - total, setting.draws.size * z.sum(axis=1)
