"""Supports of swapped priors: where the target reaches beyond the base, and how the edge looks."""

from __future__ import annotations

import math
from collections.abc import Iterator
from typing import Any

import numpy as np

from steelyard.base import Base
from steelyard.base.draws import Array
from steelyard.base.pooling import Pooling
from steelyard.changes.merging import PriorTarget
from steelyard.changes.target import Target
from steelyard.densities import Distribution
from steelyard.verdicts import Finding, judge
from steelyard.weighing.weigh import base_weights

__all__ = ["support_findings"]

Limits = tuple[Array, Array]

# Width of the strip along an edge in which base draws are counted, in base sds.
_STRIP = 0.2


def support_findings(base: Base, target: Target) -> Iterator[Finding]:
    """Support gaps of swapped priors, and pressure of the base at a limit that moved."""
    if base.draws.pooling is not None:
        yield from _of_union(base, target, base.draws.pooling)
        return
    for prior in target.prior.values():
        if not prior.is_swapped:
            continue
        old_limits, new_limits = _support(prior.base, base), _support(prior.density, base)
        if prior.base.is_discrete and prior.density.is_discrete is False and new_limits is not None:
            new_text = f"every number {_interval(*new_limits)}"
            yield judge("support_gap", term=prior.base.label, old="whole numbers", new=new_text)
            continue
        if old_limits is not None and _covers_the_line(old_limits):
            continue
        if old_limits is None or new_limits is None:
            yield judge("support_unknown", term=prior.base.label)
            continue
        gaps = [
            ("lower", old_limits[0], new_limits[0] < old_limits[0]),
            ("upper", old_limits[1], new_limits[1] > old_limits[1]),
        ]
        if not any(bool(np.any(gap)) for _, _, gap in gaps):
            continue
        old_text, new_text = _interval(*old_limits), _interval(*new_limits)
        yield judge("support_gap", term=prior.base.label, old=old_text, new=new_text)
        for side, edge, gap in gaps:
            if np.any(gap):
                yield from _edge_pressure(prior, base, edge, side)


def _of_union(base: Base, target: Target, pooling: Pooling) -> Iterator[Finding]:
    """The same where several fits were pooled: one of them may reach where another does not."""
    wanted = {label: _support(p.density, base) for label, p in target.prior.items()}
    for label, term in (base.prior or {}).items():
        wanted.setdefault(label, _support(term, base))
    reached = [
        {label: _support(prior[label], base) if label in prior else None for label in wanted}
        for prior in pooling.priors
    ]
    short = [
        [label for label in wanted if not _covers([own[label]], wanted[label])] for own in reached
    ]
    if not all(short):
        return
    for label in wanted:
        parts = [own[label] for own, lacks in zip(reached, short, strict=True) if lacks == [label]]
        if parts and _covers(parts, wanted[label]):
            return
    label = min(short, key=len)[0]
    parts = [own[label] for own in reached]
    new = wanted[label]
    if new is None or any(part is None for part in parts):
        yield judge("support_unknown", term=label)
        return
    old = " and ".join(dict.fromkeys(_interval(*part) for part in parts if part is not None))
    yield judge("support_gap", term=label, old=old, new=_interval(*new))


def _covers(parts: list[Limits | None], wanted: Limits | None) -> bool:
    """Whether intervals together hold another one, for every element."""
    known = [part for part in parts if part is not None]
    if any(_covers_the_line(part) for part in known):
        return True
    if wanted is None or not known:
        return False
    reach: Array = np.asarray(wanted[0])
    for _ in known:
        for low, high in known:
            reach = np.where(low <= reach, np.maximum(reach, high), reach)
    return bool(np.all(reach >= wanted[1]))


def _support(term: Any, base: Base) -> tuple[Array, Array] | None:
    """Limits of a term's density; None where they are not known."""
    density = term.density
    if isinstance(density, Distribution):
        value = term.value(base.draws)
        return density.support(value.shape, look_up=base.draws.look_up)
    if hasattr(density, "support") and callable(density.support):
        low, high = density.support()
        return np.asarray(low, dtype=np.float64), np.asarray(high, dtype=np.float64)
    if hasattr(density, "dim"):  # frozen multivariate normal and Student-t: the whole space
        name = type(density).__name__
        if name.startswith(("multivariate_normal", "multivariate_t")):
            return np.asarray(-math.inf), np.asarray(math.inf)
    return None


def _covers_the_line(limits: tuple[Array, Array]) -> bool:
    return bool(np.all(limits[0] == -math.inf) and np.all(limits[1] == math.inf))


def _interval(low: Array, high: Array) -> str:
    def limit(values: Array) -> str:
        spread = np.unique(values)
        return f"{spread[0]:g}" if spread.size == 1 else f"{spread[0]:g}…{spread[-1]:g}"

    return f"from {limit(low)} to {limit(high)}"


def _edge_pressure(prior: PriorTarget, base: Base, edge: Array, side: str) -> Iterator[Finding]:
    """Density of the base at a limit, in units of one over the base sd, from the draws near it."""
    value = prior.base.value(base.draws)
    limit = np.broadcast_to(edge, value.shape)
    if not np.isfinite(limit).all():
        return
    distance = (value - limit if side == "lower" else limit - value).reshape(base.draws.size, -1)
    weights = base_weights(base).linear
    columns = value.reshape(base.draws.size, -1)
    mean = weights @ columns
    sd = np.sqrt(weights @ (columns - mean) ** 2)
    sd = np.where(sd > 0, sd, 1.0)
    with np.errstate(over="ignore"):
        density = weights @ ((distance / sd) < _STRIP) / _STRIP
    yield judge(
        "edge_pressure",
        float(density.max()),
        term=prior.base.label,
        edge=f"{np.unique(limit)[0]:g}",
    )
