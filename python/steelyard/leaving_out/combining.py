"""Weights of models that maximise the left-out log score of their mixture."""

from __future__ import annotations

from collections.abc import Mapping
from dataclasses import dataclass
from html import escape
from typing import TYPE_CHECKING, Any

import numpy as np

from steelyard.arrays import Frozen, ReadOnly
from steelyard.base.draws import Array
from steelyard.digits import short
from steelyard.errors import ArgumentError, ArgumentTypeError, SteelyardError
from steelyard.leaving_out.contrast import refuse_other_groups
from steelyard.verdicts import Verdict

if TYPE_CHECKING:
    from steelyard.leaving_out.result import LeaveOut

__all__ = ["Combination", "combine", "simplex_weights"]

_GAP = 1e-10
_STEPS = 200


@dataclass(frozen=True, eq=False)
class Combination(Frozen):
    """
    A mixture of models.

    Attributes
    ----------
    weights : mapping of str to float
        Weights that sum to one, by the names of the models.
    log_score : float
        Left-out log score of the mixture, summed over groups.
    by_group : numpy.ndarray
        Log score of the mixture for each group.
    gap : float
        How far the conditions of a maximum are missed: no other mixture has a mean log score
        higher by more.
    verdict : Verdict
        What may be said of the weights behind the scores of all models.
    """

    weights: Mapping[str, float]
    log_score: float
    by_group: Array
    gap: float
    verdict: Verdict

    def __str__(self) -> str:
        parts = ", ".join(f"{name} {weight:.3f}" for name, weight in self.weights.items())
        return f"mixture {parts}: log score {short(self.log_score)} ({self.verdict.level})"

    def __repr__(self) -> str:
        return f"<Combination {self}>"

    def _repr_html_(self) -> str:
        return f"<p>{escape(str(self))}</p>"


def combine(models: Mapping[str, LeaveOut]) -> Combination:
    """
    Combine models by the weights under which their mixture predicts best.

    Parameters
    ----------
    models : mapping of str to LeaveOut
        What ``leave_out`` of each model's fit gave, by the model's name; on the same observations.

    Returns
    -------
    Combination
        The weights, and the log score of the mixture.

    Raises
    ------
    ArgumentTypeError
        For something other than a mapping of at least two.
    ShapeError, ArgumentError
        Where the observations or groups differ.

    Notes
    -----
    Maximises ``Σ_i log Σ_k a_k exp(score_ik)`` over weights that sum to one: concave. Each step
    solves the quadratic approximation over weights that are not negative, and is shortened until
    the score rises; it ends where no model's gradient exceeds that of the mixture.

    References
    ----------
    .. [1] Yao, Vehtari, Simpson, Gelman (2018), Bayesian Analysis 13.
    """
    if not isinstance(models, Mapping) or len(models) < 2:
        raise ArgumentTypeError(
            "models",
            "{name: what leave_out gave} for two models or more",
            f"{type(models).__name__}",
            'Write {"linear": one, "with a break": two}.',
        )
    items = list(models.items())
    first_name, first = items[0]
    for name, other in items[1:]:
        try:
            refuse_other_groups(first, other)
        except SteelyardError as error:
            raise type(error)(
                f"models[{str(name)!r}]",
                f"{error.expected}, as in {first_name!r}",
                error.came,
                error.next_step,
            ) from error
    scores = np.stack([one._scores for _, one in items], axis=1)
    weights, gap = simplex_weights(scores)
    with np.errstate(divide="ignore"):
        joint = scores + np.log(weights)
    top = joint.max(axis=1, keepdims=True)
    mixture = top[:, 0] + np.log(np.exp(joint - top).sum(axis=1))
    findings = [f for _, one in items for f in one.verdict.findings]
    named = {str(name): float(w) for (name, _), w in zip(items, weights, strict=True)}
    return Combination(
        ReadOnly(named),
        float(mixture.sum()),
        mixture.reshape(first.shape),
        gap,
        Verdict(findings),
    )


def simplex_weights(scores: Array) -> tuple[Array, float]:
    """Weights ``(K,)`` from log scores ``(N, K)``, and how far the conditions are missed."""
    if not np.isfinite(scores.max(axis=1)).all():
        raise ArgumentError(
            "models",
            "a finite log score of each group under some model",
            "a group that no model can have made",
            "Look at that group: no mixture of these models predicts it.",
        )
    density = np.exp(scores - scores.max(axis=1, keepdims=True))
    a = np.full(scores.shape[1], 1 / scores.shape[1])
    for _ in range(_STEPS):
        if _missed(density, a) < _GAP:
            break
        a = _step(density, a)
    return a, _missed(density, a)


def _gradient(density: Array, a: Array) -> Array:
    return np.asarray((density / (density @ a)[:, None]).mean(axis=0))


def _missed(density: Array, a: Array) -> float:
    """Largest violation: ``g_k ≤ 1`` for every model, and ``g_k = 1`` where it has weight."""
    g = _gradient(density, a)
    return float(max((g - 1).max(), np.abs(a * (g - 1)).max()))


def _value(density: Array, a: Array) -> float:
    mixture = density @ a
    # The sum of the weights takes the place of its constraint: at the maximum it is one.
    return float(np.log(mixture).mean() - a.sum()) if (mixture > 0).all() else -np.inf


def _step(density: Array, a: Array) -> Array:
    scaled = density / (density @ a)[:, None]
    hessian = scaled.T @ scaled / len(scaled)
    hessian += 1e-13 * np.trace(hessian) * np.eye(len(a))
    towards = _not_negative(hessian, 2 * scaled.mean(axis=0) - 1)
    start, size = _value(density, a), 1.0
    while size > 1e-10:
        trial = a + size * (towards - a)
        if _value(density, trial) > start:
            return np.asarray(trial / trial.sum())
        size /= 2
    # Rounding stops the quadratic step: the multiplicative one never lowers the score.
    better = a * _gradient(density, a)
    return np.asarray(better / better.sum())


def _not_negative(hessian: Array, slope: Array) -> Array:
    """Minimum of ``½ x'Hx − c'x`` over x ≥ 0, by active sets (Lawson & Hanson 1974)."""
    count = len(slope)
    x, free = np.zeros(count), np.zeros(count, dtype=np.bool_)
    for _ in range(10 * count):
        push = np.where(free, -np.inf, slope - hessian @ x)
        if push.max() <= 1e-14:
            break
        free[int(np.argmax(push))] = True
        x = _inside(hessian, slope, x, free)
    return x


def _inside(hessian: Array, slope: Array, x: Array, free: Any) -> Array:
    """Move to the minimum over the free entries, fixing those that would turn negative."""
    while True:
        rows = np.flatnonzero(free)
        goal = np.zeros_like(x)
        goal[rows] = np.linalg.solve(hessian[np.ix_(rows, rows)], slope[rows])
        low = rows[goal[rows] <= 0]
        if not len(low):
            return goal
        steps = x[low] / np.where(x[low] - goal[low] > 0, x[low] - goal[low], 1.0)
        x = x + float(steps.min()) * (goal - x)
        fixed = low[np.argmin(steps)]
        free[fixed], x[fixed] = False, 0.0
        if not free.any():
            return np.maximum(x, 0.0)
