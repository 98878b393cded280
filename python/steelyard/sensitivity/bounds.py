"""The worst that any change in a class can do to a quantity."""

from __future__ import annotations

import math
from dataclasses import dataclass, replace
from html import escape
from typing import Any, Literal

import numpy as np

from steelyard import _core
from steelyard.answers.estimate import Estimate
from steelyard.answers.estimating import Scale, finish, study, study_pair
from steelyard.answers.quantities import Quantity, read_quantity
from steelyard.answers.reweigh import base_answer
from steelyard.arrays import Frozen
from steelyard.base import Base
from steelyard.base.draws import Array
from steelyard.errors import ArgumentError, ArgumentTypeError, QuantityError
from steelyard.sensitivity.tilting import Tilt, tilt_to_divergence
from steelyard.verdicts import Finding
from steelyard.weighing.trust import shared_findings, weight_findings
from steelyard.weighing.weigh import Weights, weigh_ratio

__all__ = ["Bounds", "log_base_of", "one_column", "weighed_by", "worst_case"]


@dataclass(frozen=True, eq=False)
class Bounds(Frozen):
    """
    Lowest and highest mean of a quantity over a class of targets.

    Attributes
    ----------
    lower, upper : Estimate
        With Monte Carlo errors and verdicts.
    lower_log_weights, upper_log_weights : numpy.ndarray
        Normalised log weights of the targets that reach the bounds, ``(chain, draw)`` or ``(n,)``.
    kind : {"inner bound", "bound"}
        A ball of divergence may reach beyond what the draws have visited, so its bounds are inner
        ones: the class can do at least this much. The ratio class cannot put more than R times
        the base's mass anywhere; its bounds are bounds.
    described : str
        The class in words.
    """

    lower: Estimate
    upper: Estimate
    lower_log_weights: Array
    upper_log_weights: Array
    kind: Literal["inner bound", "bound"]
    described: str

    def __str__(self) -> str:
        ends = (f"  {side} {self.kind}: {getattr(self, side)}" for side in ("lower", "upper"))
        return "\n".join([self.described, *ends])

    def __repr__(self) -> str:
        return f"<Bounds {self}>"

    def _repr_html_(self) -> str:
        return f"<pre>{escape(str(self))}</pre>"


def worst_case(
    base: Base,
    quantity: Any,
    *,
    divergence: float | None = None,
    ratio: float | None = None,
    contamination: float | None = None,
    prior_of: str | None = None,
) -> Bounds:
    """Bounds over a class; see ``Fit.worst_case``."""
    classes = {"divergence=δ": divergence, "ratio=R": ratio, "contamination=ε": contamination}
    named = [name for name, value in classes.items() if value is not None]
    if len(named) != 1:
        raise ArgumentError(
            "worst_case",
            f"one class: {', '.join(classes)}",
            " and ".join(named) or "none",
            "Name one of them.",
        )
    if (contamination is None) != (prior_of is None):
        raise ArgumentError(
            "prior_of",
            "the parameter whose prior is contaminated, with contamination= alone",
            repr(prior_of),
            'Write worst_case(q, contamination=0.1, prior_of="mu").',
        )
    asked = one_column(quantity, base, "worst_case")
    if divergence is not None:
        return _ball(base, asked, _positive(divergence, "divergence", 0.0))
    if ratio is not None:
        return _ratio_class(base, asked, _positive(ratio, "ratio", 1.0))
    return _contaminated(base, asked, contamination, str(prior_of))


def _contaminated(base: Base, asked: Quantity, share: Any, parameter: str) -> Bounds:
    from steelyard.sensitivity.contamination import contaminated

    share = _positive(share, "contamination", 0.0)
    if share >= 1:
        raise ArgumentError(
            "contamination", "a share below 1", f"{share:g}", "Write 0.1 for a tenth."
        )
    described = (
        f"priors of {parameter} that are the stated one but for a share of {share:g} of any kind"
    )
    return _bounds(base, contaminated(base, asked, share, parameter), "inner bound", described)


def _bounds(
    base: Base,
    ends: list[tuple[Estimate, Array]],
    kind: Literal["inner bound", "bound"],
    described: str,
) -> Bounds:
    """Bounds from the lower and the upper end and their log weights."""
    (lower, low), (upper, high) = ends
    return Bounds(lower, upper, base.draws.shaped(low), base.draws.shaped(high), kind, described)


def _positive(value: Any, argument: str, least: float) -> float:
    if isinstance(value, bool) or not isinstance(value, int | float | np.integer | np.floating):
        raise ArgumentTypeError(argument, "a number", repr(value), "Write for instance 2.0.")
    if not (math.isfinite(value) and value > least):
        raise ArgumentError(
            argument, f"a finite number above {least:g}", f"{value:g}", "Widen the class."
        )
    return float(value)


def one_column(quantity: Any, base: Base, verb: str) -> Quantity:
    """A quantity or event of one number a draw that varies among draws with weight."""
    read = read_quantity(quantity, base, events=True)
    if read.columns.shape[1] != 1:
        raise QuantityError(
            "quantity", "one number a draw", f"shape {read.shape}", 'Name one: "rate[3]".'
        )
    f = read.columns[:, 0]
    if base.log_weights is not None:
        f = f[base.log_weights > -np.inf]
    if np.ptp(f) == 0:
        raise QuantityError(
            "quantity",
            "one that varies over the draws",
            f"{f[0]:g} at every draw",
            f"{verb} has nothing to move: ask for another quantity.",
        )
    return read


def log_base_of(base: Base) -> Array:
    """Normalised log weights of the base."""
    return np.asarray(base_answer(base)._weights.log)


def weighed_by(base: Base, log_ratio: Array) -> tuple[Weights, tuple[Finding, ...]]:
    """Weights of a target found on the draws themselves, unsmoothed, and what they say."""
    answer = base_answer(base)
    own = None if base.log_weights is None else answer._weights.log
    weights = weigh_ratio(log_ratio, own, base.draws, ordered=base.ordered, smooth=False)
    return weights, (
        *weight_findings(weights, base.draws, base.ordered),
        *shared_findings(weights, base.draws, base.ordered),
        *answer._findings,
    )


def _ball(base: Base, asked: Quantity, divergence: float) -> Bounds:
    """
    Bounds over ``KL(q‖p) ≤ δ``: exponential tilts of both signs (Csiszár 1975).

    The upper one is ``min_η (log E exp(η f) + δ)/η``; at the minimum its influence is that of
    ``log E exp(η f)`` alone, ``(exp(η f)/E exp(η f) − 1)/η``.
    """
    f, log_base = asked.columns[:, 0], log_base_of(base)
    ends = [_tilted(base, asked, f, log_base, divergence, sign) for sign in (-1.0, 1.0)]
    described = f"targets within a divergence of {divergence:g} of the base"
    return _bounds(base, ends, "inner bound", described)


def _tilted(
    base: Base, asked: Quantity, f: Array, log_base: Array, divergence: float, sign: float
) -> tuple[Estimate, Array]:
    t = tilt_to_divergence(f, log_base, divergence, sign)
    if math.isinf(t):
        # The ball holds the point mass on the last draw: the draws end, the bound does not.
        extreme = f.max() if sign > 0 else f.min()
        log_ratio = np.where(f == extreme, 0.0, -np.inf)
        value, eta = float(extreme), math.inf
    else:
        tilt = Tilt(f, log_base, t)
        log_ratio, value, eta = tilt.log_ratio, tilt.mean, t
    weights, findings = weighed_by(base, log_ratio)
    scale = Scale(base, weights, base_answer(base)._weights, findings)
    ones = np.ones((base.draws.size, 1)) / (eta if math.isfinite(eta) else 1.0)
    series = study_pair(scale, ones, ones)
    if math.isinf(eta):
        series = replace(series, error=np.array([math.inf]))
    return _estimate(scale, asked, value, series), weights.log


def _estimate(scale: Scale, asked: Quantity, value: float, series: Any) -> Estimate:
    plain = Quantity(asked.label, asked.columns[:, 0])
    return finish(scale, plain, np.array([value]), series, None)


def _ratio_class(base: Base, asked: Quantity, ratio: float) -> Bounds:
    """
    Bounds over ``max(q/p)/min(q/p) ≤ R`` (DeRobertis & Hartigan 1981), exact for the draws.

    Weight R on one side of a threshold and 1 on the other; the threshold is the bound itself, so
    its influence is that of the weighted mean at a fixed threshold.
    """
    f, log_base = asked.columns[:, 0], log_base_of(base)
    ends = []
    for sign in (-1.0, 1.0):
        above = _upper_set(sign * f, np.exp(log_base), ratio)
        weights, findings = weighed_by(base, np.where(above, math.log(ratio), 0.0))
        scale = Scale(base, weights, base_answer(base)._weights, findings)
        value = float(_core.weighted_mean(f[:, None], weights.linear)[0])
        series = study(scale, (f - value)[:, None])
        ends.append((_estimate(scale, asked, value, series), weights.log))
    described = f"targets whose density ratio to the base varies by a factor of at most {ratio:g}"
    return _bounds(base, ends, "bound", described)


def _upper_set(f: Array, v: Array, ratio: float) -> Any:
    """The draws that get weight R so that the mean of `f` is largest: one sort, one pass."""
    order = np.argsort(-f, kind="stable")
    mass, moment = np.cumsum(v[order]), np.cumsum((v * f)[order])
    total, whole = mass[-1], moment[-1]
    means = (whole + (ratio - 1) * moment) / (total + (ratio - 1) * mass)
    threshold = f[order][int(np.argmax(means))]
    return f >= threshold
