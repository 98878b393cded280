"""A small set of groups whose joint deletion flips a decision."""

from __future__ import annotations

from dataclasses import dataclass
from html import escape
from typing import TYPE_CHECKING, Any, Literal

import numpy as np

from steelyard.answers import Answer, Estimate, base_answer, reweigh
from steelyard.arrays import Frozen
from steelyard.changes import drop
from steelyard.errors import ArgumentError, ChangeError
from steelyard.leaving_out.influence import influence

if TYPE_CHECKING:
    from steelyard.leaving_out.result import LeaveOut

__all__ = ["Flip", "fewest_to_flip"]

Status = Literal["flips", "holds", "unknown"]


@dataclass(frozen=True, eq=False)
class Flip(Frozen):
    """
    Whether leaving out few groups flips a decision.

    Attributes
    ----------
    status : str
        ``"flips"``: the groups flip it; ``"holds"``: so many may go and it still stands, by the
        greedy order; ``"unknown"``: the joint weights ask for a refit before it flips.
    groups : tuple of str
        Names of the groups, in the order in which they were taken out.
    positions : tuple of int
        Their flat positions.
    before : Estimate
        The probability with all data, held against the level.
    after : Estimate
        The probability without the groups, re-weighed exactly and jointly, with its verdict.
    """

    status: Status
    groups: tuple[str, ...]
    positions: tuple[int, ...]
    before: Estimate
    after: Estimate

    def __str__(self) -> str:
        count = f"{len(self.groups)} group" + ("" if len(self.groups) == 1 else "s")
        named = ", ".join(self.groups[:12]) + (", …" if len(self.groups) > 12 else "")
        words = {
            "flips": f"flips without {count}: {named}",
            "holds": f"holds without {count} that work against it most: {named}",
            "unknown": f"unknown: the weights without {count} ask for a refit: {named}",
        }
        if not self.groups:
            return f"unknown: too few draws on one side of the event\n  before: {self.before}"
        return f"{words[self.status]}\n  before: {self.before}\n  after:  {self.after}"

    def __repr__(self) -> str:
        return f"<Flip {self}>"

    def _repr_html_(self) -> str:
        return f"<pre>{escape(str(self))}</pre>"


def fewest_to_flip(left: LeaveOut, event: Any, level: float, most: int) -> Flip:
    """Greedy on influence, then exact; see ``LeaveOut.fewest_to_flip``."""
    if left._groups.is_conditional or left._groups.deleted is not None:
        raise ChangeError(
            "fewest_to_flip",
            "groups whose terms of the likelihood add up",
            "conditional terms, or groups deleted with neighbours",
            "Leave out by the likelihood's own terms, or refit without the groups.",
        )
    if isinstance(most, bool) or not isinstance(most, int | np.integer) or most < 1:
        raise ArgumentError("most", "an integer of at least 1", repr(most), "Say how many.")
    base = left._base
    before = base_answer(base).prob(event, level=level)
    if np.ndim(before.value):
        raise ArgumentError("event", "a single event", f"shape {before.value.shape}", "Pick one.")
    if str(before.verdict.level) == "refit":
        return Flip("unknown", (), (), before, before)
    above = bool(before.decision.above)
    shift = influence(left, event).value.reshape(-1)
    push = -shift if above else shift
    order = [int(i) for i in np.argsort(-np.nan_to_num(push), kind="stable") if push[i] > 0]
    taken: list[int] = []
    after = before
    status: Status = "holds"
    for row in order[: int(most)]:
        if len(taken) + 1 >= left._groups.count:
            break
        taken.append(row)
        after = _without(left, taken).prob(event, level=level)
        if str(after.verdict.level) == "refit":
            status = "unknown"
            break
        if bool(after.decision.above) != above:
            status = "flips"
            taken, after = _spared(left, taken, after, event, level, above)
            break
    positions = tuple(int(left._chosen[row]) for row in taken)
    names = tuple(left.name_of(row) for row in taken)
    return Flip(status, names, positions, before, after)


def _without(left: LeaveOut, rows: list[int]) -> Answer:
    """The answer without some groups, jointly."""
    term = left._groups.term
    mask = np.zeros(term.observations, dtype=np.bool_)
    for row in rows:
        mask[left._groups.observations_of(int(left._chosen[row]))] = True
    return reweigh(left._base, drop({term.name: mask.reshape(term.obs_shape)}))


def _spared(
    left: LeaveOut, taken: list[int], after: Estimate, event: Any, level: float, above: bool
) -> tuple[list[int], Estimate]:
    """Put back, one by one, groups without which the decision flips all the same."""
    kept = list(taken)
    for row in taken[:-1]:
        fewer = [other for other in kept if other != row]
        if not fewer:
            continue
        trial = _without(left, fewer).prob(event, level=level)
        if bool(trial.decision.above) != above and str(trial.verdict.level) != "refit":
            kept, after = fewer, trial
    return kept, after
