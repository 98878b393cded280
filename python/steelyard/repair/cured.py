"""Left-out groups whose weights failed, cured one by one on the ladder."""

from __future__ import annotations

from collections.abc import Mapping
from dataclasses import dataclass
from html import escape
from typing import Any

import numpy as np

from steelyard import _core
from steelyard.answers import Answer, Estimate
from steelyard.base import Base
from steelyard.base.draws import Array
from steelyard.changes import Change
from steelyard.changes.edits import Drop
from steelyard.digits import short
from steelyard.errors import ArgumentTypeError, LikelihoodError
from steelyard.leaving_out import LeaveOut
from steelyard.leaving_out.blocks import read_columns
from steelyard.leaving_out.deletion import unseen_mass
from steelyard.repair.climbing import repair
from steelyard.repair.ladder import Ladder
from steelyard.table import Table
from steelyard.weighing.series import standard_error

__all__ = ["Cured", "left_out"]


@dataclass(frozen=True, eq=False)
class Cured:
    """
    Left-out groups after repair.

    Made by :func:`steelyard.repair.left_out`.

    Attributes
    ----------
    left_out : LeaveOut
        With the scores of the groups that became sound.
    scores : mapping of str to Estimate
        The score of each group that was tried, by its name.
    ladders : mapping of str to Ladder
        What each cost.

    Examples
    --------
    >>> import numpy as np, steelyard as sy
    >>> from steelyard.repair import left_out
    >>> readings = np.append(np.random.default_rng(3).normal(0.10, 0.03, size=12), 0.4)
    >>> def gauge(draws):
    ...     return -0.5 * ((readings - draws["rate"][:, None]) / 0.03) ** 2
    >>> rate = np.random.default_rng(4).normal(readings.mean(), 0.03 / 13**0.5, size=(4, 500))
    >>> fit = sy.Fit({"rate": rate}, {"rate": sy.Flat()}, gauge)
    >>> left = fit.leave_out()
    >>> cured = left_out(fit, left)
    >>> str(left.verdict.level), str(cured.left_out.verdict.level), list(cured.ladders)
    ('refit', 'sound', ['12'])
    """

    left_out: LeaveOut
    scores: Mapping[str, Estimate]
    ladders: Mapping[str, Ladder]

    def table(self) -> Table:
        """
        One row a group that was tried.

        Returns
        -------
        Table
            Columns ``group``, ``log score``, ``error``, ``level``, ``rung`` and ``evaluations``.
        """
        scores, ladders = self.scores.values(), self.ladders.values()
        errors = [float(s.error) for s in scores]
        columns: dict[str, list[Any]] = {
            "group": list(self.scores),
            "log score": [float(s.value) for s in scores],
            "error": errors,
            "level": [str(s.verdict.level) for s in scores],
            "rung": [ladder.chosen for ladder in ladders],
            "evaluations": [ladder.evaluations for ladder in ladders],
        }
        return Table(columns, {"log score": errors, "error": errors})

    def __str__(self) -> str:
        sound = sum(s.verdict.is_sound for s in self.scores.values())
        cost = sum(ladder.evaluations for ladder in self.ladders.values())
        head = f"{sound} of {len(self.scores)} groups cured for {short(cost)} evaluations"
        return f"{head}\n{self.table()}\n{self.left_out.log_score}"

    def __repr__(self) -> str:
        return f"<Cured: {len(self.scores)} groups tried>"

    def _repr_html_(self) -> str:
        return self.table()._repr_html_() + f"<p>{escape(str(self.left_out.log_score))}</p>"


def left_out(
    fit: Any,
    left: LeaveOut,
    groups: Any = None,
    *,
    rungs: Any = None,
    most_evaluations: int | None = None,
    most_seconds: float | None = None,
    rng: Any = None,
    progress: Any = None,
) -> Cured:
    """
    Cure left-out groups whose weights failed.

    Parameters
    ----------
    fit : Fit or Base
        The fit, whose log likelihood is callable.
    left : LeaveOut
        What leaving out gave.
    groups : list, optional
        Which groups to cure, by name or position; by default all that are not sound.
    rungs, most_evaluations, most_seconds, progress : optional
        As for ``Fit.repair``, for each group.
    rng : None, int or numpy.random.Generator, optional
        Seed or generator (SPEC 7).

    Returns
    -------
    Cured
        The leave-out with the scores of cured groups in it, and what each cost.

    Raises
    ------
    ArgumentTypeError
        For a `left` that is no leave-out.
    LikelihoodError, PriorError
        Where the fit cannot be evaluated at new points.
    UnknownNameError
        For a group that was not left out.

    Notes
    -----
    The target without group g is ``p(θ) exp(−Σ_{i∈g} L_i(θ))``; the score is
    ``log Σ w exp(Σ_{i∈g} L_i)`` at the repaired draws and weights.

    References
    ----------
    .. [1] Paananen, Piironen, Bürkner, Vehtari (2021), Statistics and Computing 31.
    """
    record = fit if isinstance(fit, Base) else getattr(fit, "_record", None)
    if not isinstance(record, Base) or not isinstance(left, LeaveOut):
        raise ArgumentTypeError(
            "left", "a fit, and what its leave_out() gave", type(left).__name__, "Pass both."
        )
    _refuse_fixed(record, left)
    generator = np.random.default_rng(rng) if rng is not None else None
    scores: dict[str, Estimate] = {}
    ladders: dict[str, Ladder] = {}
    sound: dict[Any, Estimate] = {}
    for position in _chosen(left, groups):
        answer = repair(
            record,
            _without(left, position),
            rungs=rungs,
            most_evaluations=most_evaluations,
            most_seconds=most_seconds,
            rng=generator,
            progress=progress,
        )
        name = left._groups.name(position)
        scores[name], ladders[name] = _score(left, position, answer), answer.ladder
        if scores[name].verdict.is_sound:
            sound[_key(left, position)] = scores[name]
    return Cured(left.with_refits(sound) if sound else left, scores, ladders)


def _refuse_fixed(record: Base, left: LeaveOut) -> None:
    name = left._groups.term.name
    term = (record.loglik or {}).get(name)
    if term is None or left._groups.is_conditional or not callable(term.source):
        raise LikelihoodError(
            f"loglik[{name!r}]",
            "a callable, which can be evaluated at new points",
            "conditional densities" if left._groups.is_conditional else "an array of values",
            "Pass a callable that gets {name: (n, *shape)} and returns (n, *obs).",
        )


def _chosen(left: LeaveOut, groups: Any) -> list[int]:
    if groups is None:
        failed = np.flatnonzero(np.ravel(left._ranks) < 2)
        return [int(left._chosen[row]) for row in failed]
    listed = groups if isinstance(groups, list) else [groups]
    return [left._groups.find(group, "groups") for group in listed]


def _without(left: LeaveOut, position: int) -> Change:
    """The change that leaves out what goes with one group."""
    held, term = left._groups, left._groups.term
    gone = held.observations_of(position) if held.deleted is None else held.deleted[position]
    mask = np.zeros(term.observations, dtype=np.bool_)
    mask[gone] = True
    return Change((Drop({term.name: mask.reshape(term.obs_shape)}, "position"),))


def _key(left: LeaveOut, position: int) -> Any:
    """How the group is named to ``LeaveOut.with_refits``."""
    groups = left._groups
    if len(groups.shape) > 1:
        return tuple(int(i) for i in np.unravel_index(position, groups.shape))
    return groups.name(position) if any(d in groups.labels for d in groups.dims) else position


def _score(left: LeaveOut, position: int, answer: Answer) -> Estimate:
    """``log Σ w exp(L)`` with its influence series ``S w (exp(L)/p − 1)``."""
    record, weights = answer._base, answer._weights
    columns = np.asarray(left._groups.observations_of(position))
    scored: Array = read_columns(left._groups.term, record.draws, columns).sum(axis=1)
    joint = np.ascontiguousarray((weights.log + scored)[:, None])
    score = float(_core.log_sum_exp(joint)[0])
    z = record.draws.size * (np.exp(joint - score) - weights.linear[:, None])
    share, shape = np.array([weights.largest_share]), np.array([weights.tail_shape])
    unseen = float(unseen_mass(shape, share)[0]) if np.ptp(weights.linear) > 0 else 0.0
    error = float(np.hypot(standard_error(z, record.draws, record.ordered)[0], unseen))
    return Estimate(
        score,
        error,
        weights.tail_shape,
        answer.verdict,
        weights.effective_size,
        label=f"left-out log score of {left._groups.name(position)}",
    )
