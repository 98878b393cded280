"""Collapse: a group's effects integrated out instead of multiplying a ratio for each of them."""

from __future__ import annotations

from dataclasses import dataclass, replace
from typing import Any

import numpy as np

from steelyard.base import Base, Draws
from steelyard.base.draws import Array
from steelyard.base.priors import PriorTerm
from steelyard.changes import Change
from steelyard.changes.merging import Draft, PriorTarget, merge
from steelyard.densities import Normal, StudentT
from steelyard.errors import ChangeError
from steelyard.repair.fixed import prior_at, refuse_fixed, with_derived
from steelyard.repair.grouped import Grouped, grouped_likelihood
from steelyard.repair.quadrature import NODES, Grid, grid_of
from steelyard.repair.spending import Purse

__all__ = ["Collapsed", "Plan", "collapse", "collapse_plan"]


@dataclass(frozen=True, eq=False)
class Plan:
    """What is collapsed: the merged change, and the prior term of the effects."""

    record: Base
    draft: Draft
    label: str
    edited: PriorTarget


@dataclass(frozen=True, eq=False)
class Collapsed:
    """
    Draws whose group effects were drawn anew under the target.

    Attributes
    ----------
    draws : Draws
        The draws: all but the effects as in the base.
    log_ratio : numpy.ndarray
        Log weights, without base weights, ``(n,)``.
    ratio : numpy.ndarray
        Target minus base at the new draws, ``(n,)``.
    name : str
        The parameter whose effects were integrated out.
    """

    draws: Draws
    log_ratio: Array
    ratio: Array
    name: str


def _collapse_cost(count: int) -> int:
    """Points that a collapse of so many draws evaluates: slopes, nodes, and the new effects."""
    return (NODES + 4) * count


def collapse_plan(record: Base, change: Change) -> Plan:
    """
    The group whose family a change alters.

    Raises
    ------
    ChangeError
        Where collapse does not apply, and why.
    LikelihoodError, PriorError
        For a term that cannot be evaluated at new points.
    """
    draft = merge(record, change)
    label, edited = _group_term(record, draft)
    refuse_fixed(record, draft)
    return Plan(record, draft, label, edited)


def collapse(plan: Plan, purse: Purse, generator: np.random.Generator) -> Collapsed | None:
    """
    Integrate the effects of a group out, and draw them anew.

    Parameters
    ----------
    plan : Plan
        What is collapsed.
    purse : Purse
        What may be spent.
    generator : numpy.random.Generator
        For the new effects.

    Returns
    -------
    Collapsed or None
        None where it costs more than may be spent.

    Raises
    ------
    ChangeError
        For observations that two effects touch.

    Notes
    -----
    With effects r and all else φ, a draw φ of the base has the marginal density
    ``π(φ) Π_j ∫ p(y_j|r_j, φ) π(r_j|φ) dr_j``; the integrals are found by quadrature. New effects
    come from the target's conditional, interpolated between the nodes, and the weights are the
    target at (φ, r) over that marginal and the density that r was drawn from: exact whatever the
    interpolation. The J ratios of the effects do not enter them.
    """
    record, draft, label, edited = plan.record, plan.draft, plan.label, plan.edited
    name = str(edited.base.key)
    if not purse.allows(_collapse_cost(record.draws.size)):
        return None
    purse.tell()

    def at(effects: Array) -> Draws:
        return _with_effects(record, name, effects)

    grouped = grouped_likelihood(record, draft, name, at)
    old, new = (record.prior or {})[label], edited.given or edited.base
    effects = record.draws.values_by_name[name]
    grid = _grid(record.draws, effects, (old, new), grouped)
    log_old, log_new = np.empty((2, NODES, *effects.shape))
    for node in range(NODES):
        draws = at(grid.nodes[node])
        found = grouped.at(draws)
        log_old[node] = found.base + _log_prior(old, draws, 1.0)
        log_new[node] = found.target + _log_prior(new, draws, edited.factor)
    purse.tell()
    drawn, log_density = grid.draw(log_new, generator)
    draws = at(drawn)
    found = grouped.at(draws)
    joint = found.target + _log_prior(new, draws, edited.factor)
    own = found.base + _log_prior(old, draws, 1.0)
    shared = _others(record, draft, label) + found.target_rest - found.base_rest
    purse.spent.points += _collapse_cost(record.draws.size)
    each = joint - log_density - grid.log_integral(log_old)
    axes = tuple(range(1, effects.ndim))
    with np.errstate(invalid="ignore"):
        ratio = shared + (joint - own).sum(axis=axes)
    return Collapsed(draws, shared + each.sum(axis=axes), ratio, name)


def _group_term(record: Base, draft: Draft) -> tuple[str, PriorTarget]:
    """The one prior term of a group of effects whose family the change alters."""
    found = [
        (label, edited)
        for label, edited in draft.prior.items()
        if edited.is_swapped and _is_group(record, edited)
    ]
    if len(found) != 1:
        raise ChangeError(
            "collapse",
            "a change of one normal or Student-t prior of a vector, its spread a parameter",
            f"{len(found)} such terms",
            "Other rungs do without.",
        )
    label, edited = found[0]
    for other, term in (record.prior or {}).items():
        names = getattr(term.density, "names", ())
        if other != label and any(record.draws.find(n).name == edited.base.key for n in names):
            raise ChangeError(
                "collapse",
                f"effects {edited.base.key!r} that no other prior term names",
                f"the prior of {other}",
                "Other rungs do without.",
            )
    if draft.ratios:
        raise ChangeError(
            "collapse", "a change of stated terms", "a given ratio", "Other rungs do without."
        )
    return label, edited


def _is_group(record: Base, edited: PriorTarget) -> bool:
    old, new = edited.base, edited.given
    if new is None or not isinstance(old.key, str) or old.key not in record.parameters:
        return False
    families = isinstance(old.density, Normal | StudentT) and isinstance(
        new.density, Normal | StudentT
    )
    is_vector = record.draws.values_by_name[old.key].ndim > 1
    return families and is_vector and bool(old.density.names)


def _with_effects(record: Base, name: str, effects: Array) -> Draws:
    """The base draws with other effects, derived quantities recomputed."""
    left = {*record.derived, *record.predictive}
    values: dict[str, Any] = {k: v for k, v in record.draws.values_by_name.items() if k not in left}
    values[name] = effects
    return with_derived(record, replace(record.draws, values_by_name=values))


def _log_prior(term: PriorTerm, draws: Draws, factor: float) -> Array:
    """Log density of each effect, in their shape."""
    value = term.value(draws)
    density: Array = term.density.log_density(value, look_up=draws.look_up)
    return factor * density


def _core(term: PriorTerm, draws: Draws) -> tuple[Array, Array]:
    """Location and scale of each effect's prior."""
    value = term.value(draws)
    location, scale = term.density.resolve(value.shape, look_up=draws.look_up)[-2:]
    return np.broadcast_to(location, value.shape), np.broadcast_to(scale, value.shape)


def _grid(
    draws: Draws, effects: Array, terms: tuple[PriorTerm, PriorTerm], grouped: Grouped
) -> Grid:
    """
    Nodes about each effect's conditional, from slope and curvature of its likelihood.

    Both are taken at the effect as it was drawn, which lies where its conditional does.
    """
    step = 0.3 * effects.std(axis=0) + 1e-12 * (1 + np.abs(effects).max())
    middle, up, down = (grouped.at_effects(effects + shift * step) for shift in (0.0, 1.0, -1.0))
    pieces = []
    for term, values in zip(terms, zip(*map(_pair, (middle, up, down)), strict=True), strict=True):
        now, above, below = values
        with np.errstate(invalid="ignore"):
            slope = (above - below) / (2 * step)
            curvature = np.maximum((2 * now - above - below) / step**2, 0.0)
        slope, curvature = np.nan_to_num(slope, posinf=0, neginf=0), np.nan_to_num(curvature)
        location, scale = _core(term, draws)
        precision = 1 / scale**2 + curvature
        centre = (location / scale**2 + curvature * effects + slope) / precision
        pieces.append((centre, 1 / np.sqrt(precision)))
    (one, wide), (two, other) = pieces
    return grid_of((one + two) / 2, np.maximum(wide, other) + np.abs(one - two) / 2)


def _pair(found: Any) -> tuple[Array, Array]:
    return found.base, found.target


def _others(record: Base, draft: Draft, label: str) -> Array:
    """Target minus base over the other prior terms, which the effects do not enter."""
    total = np.zeros(record.draws.size)
    for other, edited in draft.prior.items():
        if other == label:
            continue
        old = edited.base.log_density_checked(record.draws)
        total = total + prior_at(edited, old, record.draws) - old
    return np.asarray(total)
