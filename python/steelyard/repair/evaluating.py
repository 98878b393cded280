"""Base and target densities at any point, and what evaluating them has cost."""

from __future__ import annotations

from collections.abc import Iterable
from dataclasses import dataclass, field, replace
from typing import Any

import numpy as np

from steelyard.base import Base, Draws
from steelyard.base.draws import Array
from steelyard.changes import Change
from steelyard.changes.merging import Draft, LoglikTarget, merge
from steelyard.repair.fixed import (
    naming_what_is_lost,
    prior_at,
    ratio_at,
    refuse_fixed,
    values_at,
    with_derived,
)
from steelyard.repair.space import Points, Space, space_of

__all__ = ["Evaluator", "Spent", "at_draws", "evaluator_of"]

# Points that are evaluated at a time; a user's callable gets batches of this size at most.
_BATCH = 1 << 16


@dataclass
class Spent:
    """How often densities were evaluated: points, and batches that callables were given."""

    points: int = 0
    batches: int = 0


@dataclass(frozen=True, eq=False)
class _Pass:
    """Log densities of base and target at one batch of points."""

    x: Array
    base: Array
    target: Array


@dataclass(eq=False)
class Evaluator:
    """
    Base and target of a change, anywhere in the unconstrained space.

    Attributes
    ----------
    record : Base
        The fit.
    change : Change
        What is changed; without edits the target is the base.
    space : Space
        The unconstrained space.
    spent : Spent
        Points and batches evaluated so far. A point at which both densities are found counts once.
    from_prior : bool
        Whether the prior of the target stands in the place of the base.

    Notes
    -----
    Densities are those of the coordinates, log Jacobian included, and not normalised.
    """

    record: Base
    change: Change
    space: Space
    spent: Spent = field(default_factory=Spent)
    from_prior: bool = False

    def __post_init__(self) -> None:
        self._draft = merge(self.record, self.change)
        refuse_fixed(self.record, self._draft)
        self._last: _Pass | None = None

    @property
    def start(self) -> Array:
        """Coordinates of the base draws, ``(n, d)``."""
        return self.space.free(self.record.draws)

    def base(self, x: Array) -> Array:
        """Log density of the base ``(n,)`` at coordinates ``(n, d)``."""
        return self.both(x)[0]

    def target(self, x: Array) -> Array:
        """Log density of the target ``(n,)`` at coordinates ``(n, d)``."""
        return self.both(x)[1]

    # What `evaluator_of(base)` without a change is asked for.
    log_density = target

    def both(self, x: Array) -> tuple[Array, Array]:
        """
        Log densities of base and target at the same points.

        Parameters
        ----------
        x : numpy.ndarray
            Coordinates ``(n, d)``.

        Returns
        -------
        tuple of numpy.ndarray
            Base and target, ``(n,)`` each; −inf where there is no density.

        Raises
        ------
        PriorError, LikelihoodError, RatioError
            For NaN or +inf, naming the point.
        ShapeError
            Where a callable returns another shape than promised.
        """
        x = np.ascontiguousarray(x, dtype=np.float64)
        last = self._last
        if last is not None and last.x.shape == x.shape and np.array_equal(last.x, x):
            return last.base, last.target
        base, target = np.empty(len(x)), np.empty(len(x))
        for start in range(0, len(x), _BATCH):
            part = slice(start, start + _BATCH)
            base[part], target[part] = self._batch(x[part])
        self.spent.points += len(x)
        self._last = _Pass(x.copy(), base, target)
        return base, target

    def _batch(self, x: Array) -> tuple[Array, Array]:
        draws, log_jacobian = self.moved(x)
        usable = np.isfinite(log_jacobian) & _finite(draws)
        if not usable.all():
            # Coordinates so far out that a value over- or underflows have no density left.
            base, target = np.full(len(x), -np.inf), np.full(len(x), -np.inf)
            if usable.any():
                base[usable], target[usable] = self._batch(x[usable])
            return base, target
        self.spent.batches += 1
        with naming_what_is_lost(self.record):
            base, target = self._priors(draws)
            prior = target.copy()
            self._likelihoods(draws, base, target)
            base = prior if self.from_prior else base
            for source in self._draft.ratios:
                target += ratio_at(source, draws)
        return base + log_jacobian, target + log_jacobian

    def moved(self, x: Array) -> tuple[Points, Array]:
        """
        The draws at coordinates, derived quantities included, and the log Jacobian.

        Parameters
        ----------
        x : numpy.ndarray
            Coordinates ``(n, d)``.

        Returns
        -------
        tuple of Points and numpy.ndarray
            Quantities of which only values are known, and predictive draws, are left out.
        """
        points, log_jacobian = self.space.points(x)
        with np.errstate(all="ignore"):
            return with_derived(self.record, points), log_jacobian

    def at(self, x: Array, draws: Draws | None = None) -> Base:
        """
        The record with its draws moved.

        Parameters
        ----------
        x : numpy.ndarray
            Coordinates ``(n, d)``.
        draws : Draws, optional
            Whose chains the new draws have; one chain by default.

        Returns
        -------
        Base
            Without base weights, stored log density and what cannot be recomputed.
        """
        points, _ = self.moved(x)
        starts = points.starts if draws is None else draws.starts
        chain_axis = False if draws is None else draws.has_chain_axis
        names = () if draws is None else draws.chain_names
        made = Draws(points.values_by_name, starts, chain_axis, points.dims, points.labels, names)
        return at_draws(self.record, made)

    @property
    def draft(self) -> Draft:
        """The change, merged into the target."""
        return self._draft

    def _priors(self, draws: Points) -> tuple[Array, Array]:
        base, target = np.zeros(draws.size), np.zeros(draws.size)
        for label, term in (self.record.prior or {}).items():
            old = term.log_density_checked(draws)
            base += old
            edited = self._draft.prior.get(label)
            new = old if edited is None else prior_at(edited, old, draws)
            target += new
        return base, target

    def _likelihoods(self, draws: Points, base: Array, target: Array) -> None:
        stated = self.record.loglik or {}
        for name, term in stated.items():
            edited = self._draft.loglik.get(name, LoglikTarget(term, term))
            same = edited.density is term
            for part, block in values_at(term, draws):
                base[part] += block.sum(axis=1)
                if same:
                    target[part] += _weighted(block, edited)
            if not same:
                _add(edited, draws, target)
        for name, edited in self._draft.loglik.items():
            if name not in stated:
                _add(edited, draws, target)


def evaluator_of(
    record: Base,
    change: Change | None = None,
    *,
    ascending: Iterable[str] = (),
    space: Space | None = None,
) -> Evaluator:
    """
    An evaluator of a base and of the target of a change.

    Parameters
    ----------
    record : Base
        The fit.
    change : Change, optional
        What is changed; none by default.
    ascending : iterable of str, optional
        Vectors that the model keeps in ascending order.
    space : Space, optional
        The unconstrained space, derived from the prior terms by default.

    Returns
    -------
    Evaluator
        It counts what it evaluates.

    Raises
    ------
    PriorError, LikelihoodError, RatioError
        For a term or parameter that cannot move, by name.
    """
    found = space if space is not None else space_of(record, ascending=ascending)
    return Evaluator(record, Change(()) if change is None else change, found)


def at_draws(record: Base, draws: Draws) -> Base:
    """The record with other draws, without what belongs to the old ones only."""
    return replace(
        record,
        draws=draws,
        log_weights=None,
        stored_log_density=None,
        derived={k: recipe for k, recipe in record.derived.items() if recipe is not None},
        predictive={},
        is_approximate=False,
        is_moved=True,
    )


def _finite(draws: Draws) -> Any:
    usable = np.ones(draws.size, dtype=np.bool_)
    for values in draws.values_by_name.values():
        usable &= np.isfinite(values.reshape(draws.size, -1)).all(axis=1)
    return usable


def _weighted(block: Array, edited: LoglikTarget) -> Array:
    factor = np.broadcast_to(np.asarray(edited.factor), edited.density.obs_shape).reshape(-1)
    kept = np.flatnonzero(factor)  # 0 · −inf is no weight at all, not NaN
    return np.asarray((factor[kept] * block[:, kept]).sum(axis=1))


def _add(edited: LoglikTarget, draws: Draws, target: Array) -> None:
    if not np.any(edited.factor):
        return
    for part, block in values_at(edited.density, draws):
        target[part] += _weighted(block, edited)
