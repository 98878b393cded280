"""The least change that brings a quantity to a target value."""

from __future__ import annotations

from dataclasses import dataclass
from html import escape
from typing import TYPE_CHECKING, Any

import numpy as np

from steelyard.answers.estimate import Estimate
from steelyard.answers.estimating import Scale, finish, study_pair
from steelyard.answers.quantities import Quantity
from steelyard.answers.reweigh import base_answer
from steelyard.arrays import Frozen
from steelyard.base import Base
from steelyard.base.draws import Array
from steelyard.digits import short
from steelyard.errors import ArgumentError, ArgumentTypeError
from steelyard.sensitivity.bounds import log_base_of, one_column, weighed_by
from steelyard.sensitivity.prior_perturbation import PriorShape, least_in_prior
from steelyard.sensitivity.tilting import Tilt, tilt_to_mean

if TYPE_CHECKING:
    from steelyard.show.sweep_plots import PerturbationPlots

__all__ = ["Perturbation", "least_perturbation"]


@dataclass(frozen=True, eq=False)
class Perturbation(Frozen):
    """
    The least change, in Kullback–Leibler divergence, that brings a mean to a target.

    Attributes
    ----------
    divergence : Estimate
        Of the changed posterior from the base, or of the implied prior from the stated one.
    log_weights : numpy.ndarray
        Normalised log weights of the draws under it, ``(chain, draw)`` or ``(n,)``.
    factor : numpy.ndarray
        What the density is multiplied by at each draw, mean one under the base.
    tilt : float
        Multiplier of the quantity in the exponent, or of the parameter's leverage.
    quantity, target : str, float
        What was asked.
    prior : PriorShape or None
        The implied prior of the named parameter; None for a perturbation of the posterior.
    """

    divergence: Estimate
    log_weights: Array
    factor: Array
    tilt: float
    quantity: str
    target: float
    prior: PriorShape | None = None

    @property
    def plot(self) -> PerturbationPlots:
        """Plot of the implied prior beside the stated one."""
        from steelyard.show.sweep_plots import PerturbationPlots

        return PerturbationPlots(self)

    def __str__(self) -> str:
        where = "posterior" if self.prior is None else f"prior of {self.prior.parameter}"
        factors = self.factor[self.factor > 0]
        reach = f"factors from {short(float(factors.min()))} to {short(float(factors.max()))}"
        return (
            f"least change of the {where} that brings {self.quantity} to {self.target:g}: "
            f"{self.divergence}; {reach}"
        )

    def __repr__(self) -> str:
        return f"<Perturbation {self}>"

    def _repr_html_(self) -> str:
        return f"<p>{escape(str(self))}</p>"


def least_perturbation(
    base: Base, quantity: Any, target: float, prior_of: str | None = None
) -> Perturbation:
    """The least change that flips a quantity; see ``Fit.least_perturbation``."""
    asked = one_column(quantity, base, "least_perturbation")
    f = asked.columns[:, 0]
    goal = _read_target(target, f, base)
    if prior_of is not None:
        found = least_in_prior(base, asked, goal, prior_of)
        return _perturbation(base, asked, goal, found.eta, found.log_ratio, found.divergence, found)
    log_base = log_base_of(base)
    t = tilt_to_mean(f, log_base, goal)
    tilt = Tilt(f, log_base, t)
    weights, findings = weighed_by(base, tilt.log_ratio)
    scale = Scale(base, weights, base_answer(base)._weights, findings)
    # At the optimum t does not move to first order: ``sup_t (t c − log E exp(t f))``.
    minus = -np.ones((base.draws.size, 1))
    label = f"divergence that brings {asked.label} to {goal:g}"
    whole = Quantity(label, minus[:, 0])
    divergence = finish(
        scale, whole, np.array([tilt.divergence]), study_pair(scale, minus, minus), None
    )
    return _perturbation(base, asked, goal, t, tilt.log_ratio, divergence, None)


def _perturbation(
    base: Base,
    asked: Quantity,
    goal: float,
    tilt: float,
    log_ratio: Array,
    divergence: Estimate,
    prior: Any,
) -> Perturbation:
    weights, _ = weighed_by(base, log_ratio)
    factor = np.exp(log_ratio - weights.log_mean_ratio)
    return Perturbation(
        divergence,
        base.draws.shaped(weights.log),
        base.draws.shaped(factor),
        tilt,
        asked.label,
        goal,
        None if prior is None else prior.shape,
    )


def _read_target(target: Any, f: Array, base: Base) -> float:
    if isinstance(target, bool) or not isinstance(target, int | float | np.integer | np.floating):
        raise ArgumentTypeError("target", "a number", repr(target), "Say which mean to reach.")
    held = f if base.log_weights is None else f[base.log_weights > -np.inf]
    low, high = float(held.min()), float(held.max())
    if not low < target < high:
        raise ArgumentError(
            "target",
            f"a mean strictly inside the range of the draws, {low:g} to {high:g}",
            f"{target:g}",
            "No reweighing of these draws reaches it: refit, or ask for less.",
        )
    return float(target)
