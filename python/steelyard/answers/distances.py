"""How far the target lies from the base: marginal by marginal, and as a whole."""

from __future__ import annotations

import math
from collections.abc import Callable
from dataclasses import dataclass, replace

import numpy as np
import numpy.typing as npt

from steelyard import _core
from steelyard.answers.estimate import Estimate
from steelyard.answers.estimating import Scale, column_blocks, finish, joined, study_pair
from steelyard.answers.quantities import Quantity
from steelyard.arrays import Frozen, in_unit
from steelyard.base.draws import Array
from steelyard.verdicts import judge

__all__ = [
    "Distance",
    "Marginal",
    "distance_of",
    "divergence_of",
    "jensen_shannon",
    "marginal_of",
]

_LN2 = math.log(2.0)

# Influence of a draw through the target's distribution function, and through the base's; the
# change of a distance is S w times the first plus S v times the second.
Pair = tuple[Array, Array]
Positions = npt.NDArray[np.intp]


@dataclass(frozen=True, eq=False)
class Distance(Frozen):
    """
    Distances of the target's marginal from the base's, one entry an element.

    Each is a norm and cannot be negative: where target and base agree, its estimate is of the
    order of its error rather than zero.

    Attributes
    ----------
    wasserstein : Estimate
        Wasserstein-1 distance in units of the base sd: how far mass moves on average.
    largest_gap : Estimate
        Largest gap between the distribution functions (Kolmogorov).
    jensen_shannon : Estimate
        Cumulative Jensen–Shannon distance, between 0 and 1; the larger of that for the quantity
        and for its negative.
    """

    wasserstein: Estimate
    largest_gap: Estimate
    jensen_shannon: Estimate

    def __str__(self) -> str:
        parts = ("wasserstein", "largest_gap", "jensen_shannon")
        return "\n".join(f"{name}: {getattr(self, name)}" for name in parts)


@dataclass(frozen=True, eq=False)
class Marginal:
    """One column, sorted, with its distribution functions under target and base."""

    x: Array
    order: Positions
    steps: Array
    target: Array
    base: Array

    def influence(self, slope1: Array, slope0: Array) -> Pair:
        """``∫ slope(t) (1{x ≤ t} − F(t)) dt`` at every draw, for both distribution functions."""
        back = np.empty_like(self.order)
        back[self.order] = np.arange(len(self.order))
        out = []
        for slope, cdf in ((slope1, self.target), (slope0, self.base)):
            above = np.concatenate([np.cumsum((slope * self.steps)[::-1])[::-1], [0.0]])
            out.append((above - float((slope * cdf * self.steps).sum()))[back])
        return out[0], out[1]


def marginal_of(scale: Scale, x: Array) -> Marginal:
    """One column under the weights of target and base."""
    order = np.argsort(x, kind="stable")
    f1, f0 = (
        np.minimum(np.cumsum(weights.linear[order])[:-1], 1.0)
        for weights in (scale.weights, scale.base_weights)
    )
    return Marginal(x, order, np.diff(x[order]), f1, f0)


def distance_of(scale: Scale, quantity: Quantity) -> Distance:
    """Three distances of each element's marginal under the target from that under the base."""
    estimates = [
        _estimate(scale, quantity, work) for work in (_wasserstein, _largest_gap, jensen_shannon)
    ]
    return Distance(*estimates)


def _estimate(
    scale: Scale, quantity: Quantity, work: Callable[[Scale, Marginal], tuple[float, Pair, float]]
) -> Estimate:
    width = quantity.columns.shape[1]
    values, ends = np.empty(width), np.empty(width)
    parts = []
    for part, f in column_blocks(quantity.columns):
        # None of these distances depends on the unit.
        f, _ = in_unit(f)
        rows = [work(scale, marginal_of(scale, f[:, column])) for column in range(f.shape[1])]
        values[part], ends[part] = [row[0] for row in rows], [row[2] for row in rows]
        psi1, psi0 = (np.stack([row[1][which] for row in rows], axis=1) for which in (0, 1))
        parts.append(study_pair(scale, psi1, -psi0))
    found = joined(parts)
    series = replace(found, error=np.hypot(found.error, ends))
    return finish(scale, quantity, values, series, None)


def _wasserstein(scale: Scale, marginal: Marginal) -> tuple[float, Pair, float]:
    """``∫ |F₁ − F₀| dx`` over the base sd, whose own noise counts."""
    v = scale.base_weights.linear
    centred = marginal.x - float(_core.weighted_mean(marginal.x[:, None], v)[0])
    sd = math.sqrt(float(_core.weighted_mean(centred[:, None] ** 2, v)[0]))
    if sd == 0:
        return 0.0, (np.zeros_like(centred), np.zeros_like(centred)), 0.0
    gap = marginal.target - marginal.base
    value = float((np.abs(gap) * marginal.steps).sum()) / sd
    psi1, psi0 = marginal.influence(np.sign(gap) / sd, -np.sign(gap) / sd)
    return value, (psi1, psi0 - value * (centred**2 - sd**2) / (2 * sd**2)), 0.0


def _largest_gap(scale: Scale, marginal: Marginal) -> tuple[float, Pair, float]:
    """Kolmogorov's gap, and its influence at the place where it stands."""
    n = scale.count
    # Between equal values the distribution functions have no place of their own.
    gap = np.where(marginal.steps > 0, marginal.target - marginal.base, 0.0)
    at = int(np.argmax(np.abs(gap)))
    below = np.zeros(n)
    below[marginal.order[: at + 1]] = 1.0
    sign = float(np.sign(gap[at]))
    pair = (sign * (below - marginal.target[at]), -sign * (below - marginal.base[at]))
    return float(abs(gap[at])), pair, 0.0


def jensen_shannon(scale: Scale, marginal: Marginal) -> tuple[float, Pair, float]:
    """
    Nguyen & Vreeken's distance for x and for −x; the larger counts.

    Its integrals run over the range of the draws, so that the noise of the outermost draw enters
    through their total mass: the third part of the result.
    """
    steps, best = marginal.steps, (0.0, np.zeros_like(marginal.target), marginal.target * 0, 0.0)
    for p, q, sign in (
        (marginal.target, marginal.base, 1.0),
        (1 - marginal.target, 1 - marginal.base, -1.0),
    ):
        both = p + q
        with np.errstate(divide="ignore", invalid="ignore"):
            log_p = np.where(p > 0, np.log(2 * p / both), 0.0) / _LN2
            log_q = np.where(q > 0, np.log(2 * q / both), 0.0) / _LN2
        total, mass = float(((p * log_p + q * log_q) * steps).sum()), float((both * steps).sum())
        value = math.sqrt(max(total, 0.0) / mass) if mass > 0 else 0.0
        if value > best[0]:
            slope = sign / (2 * value * mass)
            edge = steps[::-1] if sign > 0 else steps
            end = value / mass * _spread_of_outermost(edge)
            best = (value, slope * (log_p - total / mass), slope * (log_q - total / mass), end)
    value, slope1, slope0, end = best
    return value, marginal.influence(slope1, slope0), end


def _spread_of_outermost(spacings: Array) -> float:
    """Sd of a sample's outermost value from its next ten spacings, as in a Gumbel tail."""
    nearest = spacings[:10]
    scale = float((nearest * np.arange(1, len(nearest) + 1)).mean()) if len(nearest) else 0.0
    return scale * math.pi / math.sqrt(6)


def divergence_of(scale: Scale) -> Estimate:
    """
    Kullback–Leibler divergence of the target from the base, ``Σ w log(w/v)``.

    Influence ``w (ℓ − E ℓ − 1) + v`` with ℓ the log of w/v. From equal base weights the estimate
    cannot exceed the log of the number of draws; from others it can, and means nothing there.
    """
    w = scale.weights.linear
    with np.errstate(invalid="ignore"):
        ratio = np.where(w > 0, scale.weights.log - scale.base_weights.log, 0.0)
    value = float(_core.weighted_mean(ratio[:, None], w)[0])
    ones = np.ones((scale.count, 1))
    series = study_pair(scale, (ratio - value - 1)[:, None], -ones)
    whole = Quantity("divergence of target from base", ones[:, 0])
    share = np.array([max(value, 0.0) / math.log(scale.count)])
    extra = (judge("saturated_divergence", share),)
    return finish(scale, whole, np.array([value]), series, None, extra=extra)
