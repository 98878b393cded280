"""Target minus base: edits are merged first, and only then is one Δ formed for each term."""

from __future__ import annotations

import math
from collections.abc import Mapping
from dataclasses import dataclass
from types import MappingProxyType
from typing import Any

import numpy as np
import numpy.typing as npt

from steelyard.arrays import Frozen, ReadOnly
from steelyard.base import Base
from steelyard.base.draws import Array, Draws
from steelyard.base.ratios import extremes_of, refuse_bad_ratio
from steelyard.base.shapes import stacked
from steelyard.changes.edits import Change
from steelyard.changes.merging import LoglikTarget, PriorTarget, merge
from steelyard.errors import ArgumentTypeError, RatioError, ShapeError

__all__ = ["Target", "form_target", "has_weight", "prior_delta"]


@dataclass(frozen=True, eq=False)
class Target(Frozen):
    """
    The target: edited terms, and target minus base term by term.

    Attributes
    ----------
    prior : mapping of str to PriorTarget
        Edited prior terms.
    loglik : mapping of str to LoglikTarget
        Edited likelihood terms.
    terms : mapping of str to numpy.ndarray
        Δ of every term that changed, ``(n,)`` each.
    log_ratio : numpy.ndarray
        Their sum.
    """

    prior: Mapping[str, PriorTarget]
    loglik: Mapping[str, LoglikTarget]
    terms: Mapping[str, Array]
    log_ratio: Array
    ratios: int = 0
    # Names of predictive draws that the change makes unusable.
    withheld: frozenset[str] = frozenset()


def form_target(base: Base, change: Change) -> Target:
    """Merge the edits of a change into the target and form target minus base."""
    if not isinstance(change, Change):
        raise ArgumentTypeError(
            "change",
            "a change",
            type(change).__name__,
            "Make one with swap_prior, swap_loglik, drop, add, weigh_data, power or log_ratio.",
        )
    draft = merge(base, change)
    terms: dict[str, Array] = {}
    for label, prior in draft.prior.items():
        delta, extremes = prior_delta(prior, base)
        _put(terms, f"prior: {label}", delta, base, extremes)
    for name, loglik in draft.loglik.items():
        _put(terms, f"likelihood: {name}", _loglik_delta(loglik, base), base)
    ratios = sorted((_given_ratio(source, base) for source in draft.ratios), key=np.ndarray.tobytes)
    for number, ratio in enumerate(ratios, start=1):
        _put(terms, "log ratio" if number == 1 else f"log ratio {number}", ratio, base)
    # A fixed order of summation: a & b and b & a agree to the last bit.
    first, *rest = sorted(terms) or [""]
    total = terms[first] if first in terms else np.zeros(base.draws.size)
    for label in rest:
        total = total + terms[label]
    if terms and base.draws.pooling is not None:
        for label, gone in base.draws.pooling.impossible.items():
            if label not in draft.prior or not draft.prior[label].is_swapped:
                total = np.where(gone, -np.inf, total)
    if len(terms) != 1 and not total.any():
        terms = {}  # edits that cancel are no change
    return Target(
        draft.prior, draft.loglik, ReadOnly(terms), total, len(draft.ratios), draft.withheld
    )


def has_weight(base: Base) -> npt.NDArray[np.bool_]:
    """Draws with a base weight above zero."""
    if base.reference is None:
        return np.ones(base.draws.size, dtype=np.bool_)
    return np.asarray(base.reference > -np.inf)


def _put(
    terms: dict[str, Array],
    label: str,
    delta: Array | None,
    base: Base,
    extremes: tuple[float, float] | None = None,
) -> None:
    """Keep Δ of a term unless it is 0 throughout; `extremes` are its own, where known."""
    if delta is None:
        return
    if base.log_weights is not None:
        # A draw without base weight has none in the target either, whatever its ratio.
        delta, extremes = np.where(has_weight(base), delta, 0.0), None
    low, high = extremes_of(delta) if extremes is None else extremes
    if low == high == 0:
        return
    if not math.isfinite(high):
        refuse_bad_ratio(delta, base.draws, label)
    delta.flags.writeable = False
    terms[label] = delta


def prior_delta(target: PriorTarget, base: Base) -> tuple[Array | None, tuple[float, float] | None]:
    """Δ of a prior term, None where it is unchanged; and its extremes where they are known."""
    factor = target.factor
    if not target.is_swapped and factor == 1:
        return None, None
    draws, stated, pooling = base.draws, target.base, base.draws.pooling
    plain = factor == 1 and pooling is None
    if plain and stated.is_distribution and target.density.is_distribution:
        delta, extremes = _quick_delta(target, draws)
        if delta is not None:
            return delta, extremes
    old = stated.log_density_checked(draws)
    new = old if not target.is_swapped else None
    if pooling is not None and stated.label in pooling.impossible:
        # Other fits of the pool may reach where this one does not.
        old = np.where(old == -np.inf, 0.0, old)
    impossible = (old == -np.inf) & has_weight(base)
    if impossible.any():
        first = int(np.argmax(impossible))
        raise RatioError(
            f"prior: {stated.label}",
            "draws inside the support of the stated prior",
            f"log density −inf at {draws.where(first)}",
            "The draws did not come from this prior: state the one that was fitted.",
        )
    if new is None:
        new = target.density.log_density_checked(draws)
    with np.errstate(invalid="ignore", over="ignore"):
        # To the power 0 a prior is flat on its own support, and still nothing outside of it.
        raised = np.where(new > -np.inf, 0.0, -np.inf) if factor == 0 else factor * new
        return np.asarray(raised - old), None


def _quick_delta(
    target: PriorTarget, draws: Draws
) -> tuple[Array | None, tuple[float, float] | None]:
    """New minus old log density, and its extremes, where all are finite, as both are then."""
    old, new = target.base.log_density(draws), target.density.log_density(draws)
    with np.errstate(invalid="ignore", over="ignore"):
        delta = np.subtract(new, old, out=new if new.flags.writeable else None)
    low, high = extremes_of(delta)
    is_finite = -math.inf < low and high < math.inf
    return (delta, (low, high)) if is_finite else (None, None)


def _loglik_delta(target: LoglikTarget, base: Base) -> Array | None:
    """``Σ_i (a_i L'_si − L_si)`` over the observations that the change touches."""
    draws, new, old = base.draws, target.density, target.base
    factor = np.broadcast_to(np.asarray(target.factor), new.obs_shape).reshape(-1)
    delta = np.zeros(draws.size)
    if old is new:
        touched = np.flatnonzero(factor != 1)
        if touched.size:
            for part, block in new.blocks(draws):
                # Σ (a − 1) L, never a L − L: 0 · −inf is no weight at all, not NaN.
                with np.errstate(over="ignore"):
                    delta[part] = ((factor[touched] - 1) * block[:, touched]).sum(axis=1)
        return delta if touched.size else None
    whole = bool((factor != 0).all())
    kept = slice(None) if whole else np.flatnonzero(factor)
    if old is not None and old.obs_shape == new.obs_shape and whole:
        # Differences first, sums after: the same values again give zero to the last bit.
        for (part, ours), (_, theirs) in zip(new.blocks(draws), old.blocks(draws), strict=True):
            with np.errstate(invalid="ignore", over="ignore"):
                delta[part] = (factor * ours - theirs).sum(axis=1)
        return delta
    for part, block in new.blocks(draws):
        with np.errstate(over="ignore"):
            delta[part] += (factor[kept] * block[:, kept]).sum(axis=1)
    if old is not None:
        for part, block in old.blocks(draws):
            with np.errstate(invalid="ignore", over="ignore"):
                delta[part] -= block.sum(axis=1)
    return delta


def _given_ratio(source: Any, base: Base) -> Array:
    draws = base.draws
    if callable(source) and not hasattr(source, "shape"):
        source = source(MappingProxyType(dict(draws.values_by_name)))
    rows = stacked(source, draws, "log_ratio")
    if rows.ndim != 1:
        raise ShapeError(
            "log_ratio",
            f"one number a draw, shape ({draws.size},)",
            str(rows.shape),
            "Sum the log ratio over its trailing axes first.",
        )
    return np.array(rows, dtype=np.float64)
