"""Which of two models predicts better, and whether the difference means anything."""

from __future__ import annotations

import math
from dataclasses import dataclass
from html import escape
from typing import TYPE_CHECKING, Any

import numpy as np

from steelyard.answers import Estimate
from steelyard.arrays import Frozen
from steelyard.base.draws import Array
from steelyard.base.names import label_texts
from steelyard.digits import rounded, short
from steelyard.errors import ArgumentError, ArgumentTypeError, ShapeError
from steelyard.verdicts import Verdict

if TYPE_CHECKING:
    from steelyard.leaving_out.groups import Groups
    from steelyard.leaving_out.result import LeaveOut

__all__ = ["Contrast", "contrast", "refuse_other_groups"]

# Below this difference, and with fewer groups, the normal error of a difference is known to be too
# small (Sivula, Magnusson, Matamoros, Vehtari 2020).
_SMALL = 4.0
_FEW = 100


@dataclass(frozen=True, eq=False)
class Contrast(Frozen):
    """
    Difference of two left-out log scores on the same observations.

    Attributes
    ----------
    difference : Estimate
        This model's log score minus the other's, with its Monte Carlo error.
    error : float
        Sampling error of the difference: ``sqrt(N var(paired differences))``; where only a sample
        of groups was left out, with what comes from drawing it.
    by_group : numpy.ndarray
        The paired differences, in the shape of the groups.
    sentence : str
        What may be said.
    names : tuple of str
        Names of the groups.
    """

    difference: Estimate
    error: float
    by_group: Array
    sentence: str
    names: tuple[str, ...] = ()

    @property
    def verdict(self) -> Verdict:
        """What may be said of the weights behind the difference."""
        return self.difference.verdict

    @property
    def plot(self) -> Any:
        """Draw where the models differ; takes ``ax=``."""
        from steelyard.show.leave_out_plots import ContrastPlots

        return ContrastPlots(self)

    def __str__(self) -> str:
        d = self.difference
        return (
            f"difference {rounded(d.value, d.error)} ± {rounded(d.error, d.error)} Monte Carlo, "
            f"± {short(float(f'{self.error:.2g}'))} sampling ({d.verdict.level})\n{self.sentence}"
        )

    def __repr__(self) -> str:
        return f"<Contrast {self}>"

    def _repr_html_(self) -> str:
        return f"<pre>{escape(str(self))}</pre>"


def contrast(left: LeaveOut, other: LeaveOut) -> Contrast:
    """Compare; see ``LeaveOut.contrast``."""
    refuse_other_groups(left, other)
    gaps = left._scores - other._scores
    one, two = left.log_score, other.log_score
    value = float(gaps.sum()) if left.sampled is None else one.value - two.value
    error = math.nan
    if len(gaps) > 1:
        with np.errstate(over="ignore"):
            error = math.sqrt(left._groups.count * float(np.var(gaps, ddof=1)))
    if left.sampled is not None and other.sampled is not None:
        # What comes from leaving out only some groups is there beside the sampling error.
        error = math.hypot(error, left.sampled.error, other.sampled.error)
    difference = Estimate(
        value,
        # Two fits have draws of their own; where they share them this is the larger error.
        math.hypot(one.error, two.error),
        max(one.tail_shape, two.tail_shape),
        Verdict([*one.verdict.findings, *two.verdict.findings]),
        min(one.effective_draws, two.effective_draws),
        degrees=min(one.degrees, two.degrees),
        label="difference in left-out log score",
    )
    names = tuple(left.name_of(row) for row in range(len(gaps)))
    sentence = _sentence(value, error, difference, len(gaps))
    return Contrast(difference, error, gaps.reshape(left.shape), sentence, names)


def _sentence(value: float, error: float, difference: Estimate, count: int) -> str:
    better = "this" if value > 0 else "the other"
    if difference.verdict.level == "refit":
        return "The weights of some groups ask for a refit: cure those before comparing."
    if value == 0 and error == 0:
        return "Both models give every group the same score."
    if difference.error > 0.5 * error and difference.error > 0.25 * abs(value):
        return (
            "The Monte Carlo error is as large as what is compared: bring more draws before "
            "comparing."
        )
    if abs(value) < _SMALL:
        return (
            f"The difference is below {_SMALL:g}: too small to tell the models apart by "
            "prediction, whatever its error."
        )
    if count < _FEW:
        return (
            f"With {count} groups the sampling error itself is uncertain and tends to be too "
            f"small: that {better} model predicts better is a hint, not a finding."
        )
    if abs(value) < 2 * error:
        return (
            "The difference is within two sampling errors: these data cannot tell which is better."
        )
    return f"On these data {better} model predicts better, by {short(abs(value) / error)} errors."


def refuse_other_groups(left: LeaveOut, other: LeaveOut) -> None:
    """Refuse to compare scores of different observations."""
    if not hasattr(other, "by_group") or not hasattr(other, "optimism"):
        raise ArgumentTypeError(
            "other", "what leave_out of the other fit gave", type(other).__name__, "Pass that."
        )
    if left._groups.shape != other._groups.shape:
        raise ShapeError(
            "other",
            f"the same groups of observations, shape {left._groups.shape}",
            str(other._groups.shape),
            "Log scores are comparable only on the same observations: leave out the same.",
        )
    if not np.array_equal(left._chosen, other._chosen):
        raise ArgumentError(
            "other",
            "the same sample of groups",
            "another one",
            "Pass the same rng= seed to both.",
        )
    if not _same_members(left._groups, other._groups):
        raise ArgumentError(
            "other",
            "the same observations in each group",
            "groups that hold others",
            "Leave out by the same labels in both fits.",
        )
    for dim in set(left._groups.labels) & set(other._groups.labels):
        mine, theirs = (label_texts(g.labels[dim]) for g in (left._groups, other._groups))
        if mine != theirs:
            first = next(i for i, (a, b) in enumerate(zip(mine, theirs, strict=True)) if a != b)
            raise ArgumentError(
                "other",
                f"the same labels along {dim!r}",
                f"{theirs[first]!r} where this fit has {mine[first]!r}",
                "Put the observations of both fits in the same order.",
            )


def _same_members(one: Groups, two: Groups) -> bool:
    if one.is_conditional or two.is_conditional:
        # Conditional terms hold one value a group: what is in it is not known.
        return True
    if (one.members is None) != (two.members is None):
        listed = enumerate(one.members or two.members or ())
        return all(len(m) == 1 and int(m[0]) == i for i, m in listed)
    pairs = zip(one.members or (), two.members or (), strict=True)
    return all(np.array_equal(a, b) for a, b in pairs)
