"""Which prior term covers which element, and how its support is carried to the real line."""

from __future__ import annotations

from collections.abc import Iterator, Mapping
from dataclasses import dataclass
from typing import Any

import numpy as np

from steelyard.base import Draws
from steelyard.base.draws import Array
from steelyard.base.names import Reference, close_names
from steelyard.base.priors import PriorTerm
from steelyard.densities import Dirichlet, Distribution, LKJCorrelation, Mixture
from steelyard.errors import ArgumentTypeError, PriorError, UnknownNameError
from steelyard.repair.transforms import (
    Ascending,
    Block,
    Columns,
    Correlation,
    Interval,
    LookUp,
    Simplex,
    constant_limits,
)

__all__ = ["Cover", "blocks_of"]

# Frozen scipy distributions whose support is the whole space.
_CLASSES_OF_REALS = ("multivariate_normal", "multivariate_t")


@dataclass(frozen=True, eq=False)
class Cover:
    """The elements of all parameters in a row."""

    draws: Draws
    shapes: Mapping[str, tuple[int, ...]]
    offsets: Mapping[str, int]
    total: int

    def places(self, found: Reference) -> Columns:
        """Positions of the elements that a reference means."""
        shape = self.shapes[found.name]
        grid = np.arange(int(np.prod(shape, dtype=np.int64))).reshape(shape)
        return np.asarray(grid[found.index], np.int64).reshape(-1) + self.offsets[found.name]

    def name_of(self, column: int) -> str:
        """The name of one element."""
        offset, name = max((o, n) for n, o in self.offsets.items() if o <= column)
        place = np.unravel_index(column - offset, self.shapes[name]) if self.shapes[name] else ()
        inner = ", ".join(str(int(i)) for i in place)
        return f"{name}[{inner}]" if inner else name


@dataclass(frozen=True, eq=False)
class _Covered:
    """One prior term and the elements that it is about."""

    term: PriorTerm
    columns: Columns


def blocks_of(
    cover: Cover, terms: Mapping[str, PriorTerm], ascending: tuple[str, ...]
) -> list[Block]:
    """Blocks for every element, those whose limits others name first."""
    covered = [_Covered(t, c) for t in terms.values() if len(c := _columns(cover, t))]
    _refuse_uncovered(cover, covered)
    pairs: list[tuple[Block, tuple[str, ...]]] = []
    loose: list[_Covered] = []
    for part in covered:
        density = _density(cover, part.term)
        if density is None:
            loose.append(part)
        else:
            pairs.append(_block(cover, part, density))
    # A callable of unknown support carries what no distribution does.
    taken = {int(c) for block, _ in pairs for c in block.columns}
    for part in loose:
        rest = np.array([c for c in part.columns if int(c) not in taken], dtype=np.int64)
        taken |= set(map(int, rest))
        if len(rest):
            pairs.append((Interval(rest, constant_limits(-np.inf, np.inf)), ()))
    _refuse_overlap(cover, pairs)
    return list(_sorted(_with_ascending(cover, pairs, ascending), cover))


def _columns(cover: Cover, term: PriorTerm) -> Columns:
    """Elements that a term is about; a label that names no parameter covers none."""
    if isinstance(term.density, np.ndarray):
        raise PriorError(
            f"prior[{term.label!r}]",
            "a term that can be evaluated at new points",
            "an array of log densities at the base draws",
            "State it as a distribution, or as a callable that gets {name: (n, *shape)}.",
        )
    names = (term.key,) if isinstance(term.key, str) else term.key
    found = []
    for name in names:
        try:
            reference = cover.draws.find(name)
        except UnknownNameError:
            if isinstance(term.key, str) and callable(term.density):
                return np.zeros(0, dtype=np.int64)
            raise
        if reference.name not in cover.shapes:
            continue  # a derived quantity: a density of it covers no parameter
        found.append(cover.places(reference))
    return np.concatenate(found) if found else np.zeros(0, dtype=np.int64)


def _refuse_uncovered(cover: Cover, covered: list[_Covered]) -> None:
    counts = np.zeros(cover.total, dtype=np.int64)
    for part in covered:
        np.add.at(counts, part.columns, 1)
    missing = np.flatnonzero(counts == 0)
    if missing.size:
        names = [cover.name_of(int(c)) for c in missing]
        whole = [n for n, s in cover.shapes.items() if _all_of(cover, n, missing)]
        said = whole or names
        raise PriorError(
            "repair",
            "a prior term for every parameter, which says where it can move",
            f"none for {', '.join(said[:6])}{', …' if len(said) > 6 else ''}",
            "State it in prior= (a flat one is sy.Flat(lower, upper)), or list the name in "
            "derived= if it is not a parameter.",
        )


def _all_of(cover: Cover, name: str, missing: Columns) -> bool:
    size = int(np.prod(cover.shapes[name], dtype=np.int64))
    own = (missing >= cover.offsets[name]) & (missing < cover.offsets[name] + size)
    return int(own.sum()) == size


def _block(cover: Cover, part: _Covered, density: Any) -> tuple[Block, tuple[str, ...]]:
    """How the elements of one term are carried, and which parameters its limits name."""
    if not isinstance(density, Distribution):
        return _frozen_block(density, part), ()
    if density.is_discrete:
        raise PriorError(
            f"prior[{part.term.label!r}]",
            "a continuous parameter",
            f"the discrete {density}",
            "Whole numbers cannot be moved by small steps: sum them out of the likelihood.",
        )
    kind = _kind(density)
    if kind is Dirichlet:
        return Simplex(part.columns, _last_axis(cover, part)), ()
    if kind is LKJCorrelation:
        return Correlation(part.columns, _last_axis(cover, part)), ()
    return _interval(cover, part, density)


def _density(cover: Cover, term: PriorTerm) -> Any:
    """The distribution of a term; None for a callable that gives log densities only."""
    if isinstance(term.density, Distribution) or not callable(term.density):
        return term.density
    if hasattr(term.density, "logpdf") or hasattr(term.density, "logpmf"):
        return term.density
    found = term.resolved(cover.draws).density
    return None if isinstance(found, np.ndarray) else found


def _kind(density: Distribution) -> type[Distribution]:
    if isinstance(density, Mixture):
        return _kind(density.components[0])
    return type(density)


def _last_axis(cover: Cover, part: _Covered) -> int:
    value = part.term.value(cover.draws)
    return int(value.shape[-1])


def _frozen_block(density: Any, part: _Covered) -> Block:
    """Blocks of frozen scipy distributions."""
    name = type(density).__name__
    if name.startswith(_CLASSES_OF_REALS):
        return Interval(part.columns, constant_limits(-np.inf, np.inf))
    if not hasattr(density, "logpdf") or not hasattr(density, "support"):
        raise PriorError(
            f"prior[{part.term.label!r}]",
            "a distribution of known continuous support",
            f"a frozen {name}",
            "State it as one of Steelyard's distributions.",
        )
    low, high = density.support()
    wide = np.ones(len(part.columns))
    return Interval(part.columns, constant_limits(low * wide, high * wide))


def _interval(cover: Cover, part: _Covered, density: Distribution) -> tuple[Block, tuple[str, ...]]:
    shape = part.term.value(cover.draws).shape
    low, high = density.support(shape, look_up=cover.draws.look_up)
    wide = [np.broadcast_to(v, shape).reshape(shape[0], -1) for v in (low, high)]
    if all((v == v[:1]).all() for v in wide):
        # Limits that are the same for every draw need no look-up at new points.
        return Interval(part.columns, constant_limits(wide[0][0], wide[1][0])), ()
    if not isinstance(part.term.density, Distribution):
        raise PriorError(
            f"prior[{part.term.label!r}]",
            "a callable whose distribution has the same support at every point",
            "limits that vary",
            'State it as a distribution with names for its limits: sy.Uniform(0, "top").',
        )

    def limits(look_up: LookUp, count: int) -> tuple[Array, Array]:
        now = (count, *shape[1:])
        found = density.support(now, look_up=look_up)
        return (
            np.broadcast_to(found[0], now).reshape(count, -1),
            np.broadcast_to(found[1], now).reshape(count, -1),
        )

    return Interval(part.columns, limits), density.names


def _with_ascending(
    cover: Cover, pairs: list[tuple[Block, tuple[str, ...]]], ascending: tuple[str, ...]
) -> list[tuple[Block, tuple[str, ...]]]:
    """Vectors that are kept in order, taken out of the interval that covers them."""
    out = list(pairs)
    for name in ascending:
        if not isinstance(name, str) or name not in cover.shapes:
            raise UnknownNameError(
                "ascending", "names of parameters", repr(name), close_names(str(name), cover.shapes)
            )
        columns = cover.places(cover.draws.find(name))
        values = cover.draws.values_by_name[name]
        if values.ndim != 2 or values.shape[1] < 2:
            raise ArgumentTypeError(
                "ascending", "vectors", f"{name!r} of shape {values.shape[1:]}", "Name a vector."
            )
        if not (np.diff(values, axis=1) > 0).all():
            row = int(np.argmin((np.diff(values, axis=1) > 0).all(axis=1)))
            raise PriorError(
                "ascending",
                f"draws of {name!r} in ascending order",
                f"draws that are not, first at {cover.draws.where(row)}",
                "Leave it out: the model does not keep this vector in order.",
            )
        place = [i for i, (b, _) in enumerate(out) if set(b.columns) & set(columns)]
        block, names = out[place[0]]
        if len(place) > 1 or not isinstance(block, Interval) or len(block.columns) != len(columns):
            raise PriorError(
                "ascending",
                f"one prior term between limits for {name!r}",
                "terms by element, or a term of shares or matrices",
                "State one distribution for the whole vector.",
            )
        out[place[0]] = (Ascending(columns, block.limits), names)
    return out


def _refuse_overlap(cover: Cover, pairs: list[tuple[Block, tuple[str, ...]]]) -> None:
    seen = set[int]()
    for block, _ in pairs:
        for column in map(int, block.columns):
            if column in seen:
                raise PriorError(
                    "repair",
                    "each parameter in one distribution",
                    f"{cover.name_of(column)} in two",
                    "State one term for it.",
                )
            seen.add(column)


def _sorted(pairs: list[tuple[Block, tuple[str, ...]]], cover: Cover) -> Iterator[Block]:
    waiting, known = list(pairs), set[int]()
    while waiting:
        ready = [
            i
            for i, (_, names) in enumerate(waiting)
            if all(set(map(int, cover.places(cover.draws.find(n)))) <= known for n in names)
        ]
        if not ready:
            raise PriorError(
                "repair",
                "limits that do not name each other in a circle",
                ", ".join(cover.name_of(int(b.columns[0])) for b, _ in waiting),
                "State one of the limits as a number.",
            )
        block, _ = waiting.pop(ready[0])
        known |= set(map(int, block.columns))
        yield block
