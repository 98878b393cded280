"""Which observations belong to which effect, and their log likelihood effect by effect."""

from __future__ import annotations

from collections.abc import Callable, Iterator, Mapping
from dataclasses import dataclass

import numpy as np
import numpy.typing as npt

from steelyard.base import Base, Draws
from steelyard.base.draws import Array
from steelyard.base.likelihood import LoglikTerm
from steelyard.changes.merging import Draft, LoglikTarget
from steelyard.errors import ChangeError
from steelyard.repair.fixed import values_at

__all__ = ["ByEffect", "Grouped", "grouped_likelihood"]

# Draws on which it is tried which observations an effect touches.
_TRIED = 4
Owners = npt.NDArray[np.int64]


@dataclass(frozen=True, eq=False)
class ByEffect:
    """Log likelihood of base and target by effect ``(n, *shape)``, and what none touches."""

    base: Array
    target: Array
    base_rest: Array
    target_rest: Array


@dataclass(frozen=True, eq=False)
class _Part:
    """One likelihood term: its weight in base and target, and the effect of each observation."""

    term: LoglikTerm
    in_base: Array
    in_target: Array
    # −1 for an observation that no effect touches.
    owners: Owners


@dataclass(frozen=True, eq=False)
class Grouped:
    """The likelihood as a sum over effects."""

    parts: tuple[_Part, ...]
    shape: tuple[int, ...]
    place: Callable[[Array], Draws]

    def at_effects(self, effects: Array) -> ByEffect:
        """The sums with other effects ``(n, *shape)`` in place of the drawn ones."""
        return self.at(self.place(effects))

    def at(self, draws: Draws) -> ByEffect:
        """The sums at draws."""
        count = int(np.prod(self.shape))
        wide = np.zeros((2, draws.size, count + 1))
        for part in self.parts:
            one_hot = np.zeros((len(part.owners), count + 1))
            one_hot[np.arange(len(part.owners)), part.owners] = 1.0
            for rows, block in values_at(part.term, draws):
                for side, factor in enumerate((part.in_base, part.in_target)):
                    kept = np.flatnonzero(factor)  # 0 · −inf is no weight at all, not NaN
                    wide[side, rows] += _sums(block[:, kept] * factor[kept], one_hot[kept])
        own = wide[..., :count].reshape(2, draws.size, *self.shape)
        return ByEffect(own[0], own[1], wide[0, :, count], wide[1, :, count])


def _sums(block: Array, one_hot: Array) -> Array:
    """Sums of columns by owner; −inf does not meet the zeros of a product."""
    lost = block == -np.inf
    sums = np.where(lost, 0.0, block) @ one_hot
    return np.where((lost @ one_hot) > 0, -np.inf, sums) if lost.any() else np.asarray(sums)


def grouped_likelihood(
    record: Base, draft: Draft, name: str, place: Callable[[Array], Draws]
) -> Grouped:
    """
    Find the effect that each observation hangs on, by moving the effects one after the other.

    Raises
    ------
    ChangeError
        For a total, and for an observation that two effects touch.
    """
    shape = record.draws.values_by_name[name].shape[1:]
    parts = []
    for term, in_base, in_target in _terms(record.loglik or {}, draft.loglik):
        owners = _owners(record, term, name, place)
        parts.append(_Part(term, in_base, in_target, owners))
    return Grouped(tuple(parts), shape, place)


def _terms(
    stated: Mapping[str, LoglikTerm], edited: Mapping[str, LoglikTarget]
) -> Iterator[tuple[LoglikTerm, Array, Array]]:
    """Terms with the weight of each observation in base and in target."""
    for name in {**stated, **edited}:
        old = stated.get(name)
        change = edited.get(name)
        if old is not None:
            kept = change is None or change.density is old
            ones = np.ones(old.observations)
            factor = _factor(change, old) if change is not None else ones
            yield old, ones, factor if kept else np.zeros(old.observations)
            if kept:
                continue
        if change is not None:
            yield (
                change.density,
                np.zeros(change.density.observations),
                _factor(change, change.density),
            )


def _factor(change: LoglikTarget, term: LoglikTerm) -> Array:
    wide = np.broadcast_to(np.asarray(change.factor, dtype=np.float64), term.obs_shape)
    return np.ascontiguousarray(wide).reshape(-1)


def _owners(record: Base, term: LoglikTerm, name: str, place: Callable[[Array], Draws]) -> Owners:
    effects = record.draws.values_by_name[name]
    rows = np.linspace(0, len(effects) - 1, min(_TRIED, len(effects))).astype(np.int64)
    step = 0.5 * effects.std(axis=0) + 1e-6
    before = _rows(term, place(effects), rows)
    owners = np.full(term.observations, -1, dtype=np.int64)
    for number, index in enumerate(np.ndindex(effects.shape[1:])):
        moved = effects.copy()
        moved[(slice(None), *index)] += step[index]
        touched = (_rows(term, place(moved), rows) != before).any(axis=0)
        twice = touched & (owners >= 0)
        if twice.any():
            what = "a total" if term.is_total else f"observation {int(np.argmax(twice))}"
            raise ChangeError(
                "collapse",
                "observations that hang on one effect each",
                f"{what} of {term.name!r}, which two touch",
                "Other rungs do without.",
            )
        owners[touched] = number
    return owners


def _rows(term: LoglikTerm, draws: Draws, rows: npt.NDArray[np.int64]) -> Array:
    """Values of a term at a few draws."""
    few = draws.take(rows)
    return np.concatenate([block for _, block in values_at(term, few)])
