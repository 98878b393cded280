"""What is left out together, and its log density by the block."""

from __future__ import annotations

from collections.abc import Iterator, Mapping, Sequence
from dataclasses import dataclass, field
from typing import Any

import numpy as np
import numpy.typing as npt

from steelyard.base import Draws
from steelyard.base.draws import Array
from steelyard.base.likelihood import LoglikTerm
from steelyard.base.names import close_names, label_texts
from steelyard.errors import UnknownNameError
from steelyard.leaving_out.blocks import read_columns, width_of

__all__ = ["Groups", "Positions"]

Positions = npt.NDArray[np.int64]


@dataclass(frozen=True, eq=False)
class Groups:
    """
    Groups of observations of one term.

    Attributes
    ----------
    term : LoglikTerm
        The term whose values are read.
    shape : tuple of int
        Shape of the groups: that of the observations where each is its own group.
    dims : tuple of str
        Names of the dimensions of `shape`; empty texts where they have none.
    labels : mapping of str to numpy.ndarray
        Labels along those dimensions.
    members : tuple of numpy.ndarray, or None
        Flat positions of each group's observations; None where each is its own group.
    deleted : tuple of numpy.ndarray, or None
        Flat positions of what is deleted with each group, where that is more than its members.
    is_conditional : bool
        Whether the values are densities of each group given the rest.
    """

    term: LoglikTerm
    shape: tuple[int, ...]
    dims: tuple[str, ...]
    labels: Mapping[str, npt.NDArray[Any]] = field(default_factory=dict)
    members: tuple[Positions, ...] | None = None
    deleted: tuple[Positions, ...] | None = None
    is_conditional: bool = False

    @property
    def count(self) -> int:
        """Number of groups."""
        return int(np.prod(self.shape, dtype=np.int64))

    def observations_of(self, group: int) -> Positions:
        """Flat positions of the observations of one group."""
        if self.members is None:
            return np.array([group], dtype=np.int64)
        return self.members[group]

    def name(self, group: int) -> str:
        """A text for one group: labels where there are any, else positions."""
        place = np.unravel_index(group, self.shape)
        parts = [
            label_texts(self.labels[dim])[int(i)] if dim in self.labels else str(int(i))
            for dim, i in zip(self.dims, place, strict=True)
        ]
        return ", ".join(parts)

    def find(self, group: Any, argument: str) -> int:
        """Flat position of a group that is meant by its name, its position or a tuple of them."""
        if isinstance(group, tuple) and len(group) == len(self.shape):
            inside = all(
                isinstance(i, int | np.integer) and 0 <= i < s
                for i, s in zip(group, self.shape, strict=True)
            )
            if inside:
                return int(np.ravel_multi_index(tuple(int(i) for i in group), self.shape))
        labelled = any(dim in self.labels for dim in self.dims)
        if labelled and len(self.shape) == 1:
            texts = label_texts(self.labels[self.dims[0]])
            if texts.count(str(group)) == 1:
                return texts.index(str(group))
        elif isinstance(group, int | np.integer) and 0 <= group < self.count:
            return int(group)
        known = [self.name(i) for i in range(min(self.count, 12))]
        raise UnknownNameError(
            argument,
            f"one of {self.count} groups",
            repr(group),
            close_names(str(group), known) if labelled else "Positions count from 0.",
        )

    def blocks(
        self, draws: Draws, chosen: Positions, *, checked: bool = True
    ) -> Iterator[tuple[slice, Array, Array]]:
        """
        Groups by the block: a slice of `chosen`, what is deleted and what is scored ``(n, k)``.

        Each is the sum of the log likelihood over the observations of a group. Unchecked blocks are
        for the kernel, which finds what is wrong itself: then :meth:`refuse` says it.
        """
        width = width_of(self.term, draws, checked=checked or self.members is not None)
        for start in range(0, len(chosen), width):
            part = slice(start, min(start + width, len(chosen)))
            if self.members is None:
                block = read_columns(self.term, draws, chosen[part], checked=checked)
                yield part, block, block
                continue
            scored = self._sums(draws, [self.members[int(g)] for g in chosen[part]])
            if self.deleted is None:
                yield part, scored, scored
            else:
                held = self._sums(draws, [self.deleted[int(g)] for g in chosen[part]])
                yield part, held, scored

    def refuse(self, draws: Draws, chosen: Positions) -> None:
        """Raise where some groups hold values that are no log densities."""
        width = width_of(self.term, draws)
        for start in range(0, len(chosen), width):
            some = chosen[start : start + width]
            if self.members is None:
                read_columns(self.term, draws, some)
            else:
                self._sums(draws, [self.members[int(g)] for g in some])

    def _sums(self, draws: Draws, members: Sequence[Positions]) -> Array:
        """Sums over each group; observations are read once for each block of groups."""
        group = np.repeat(np.arange(len(members)), [len(m) for m in members])
        position = np.concatenate(members)
        order = np.argsort(position, kind="stable")
        group, position = group[order], position[order]
        sums = np.zeros((draws.size, len(members)))
        width = width_of(self.term, draws)
        for start in range(0, len(position), width):
            part = slice(start, start + width)
            needed, back = np.unique(position[part], return_inverse=True)
            together = np.argsort(group[part], kind="stable")
            touched, first = np.unique(group[part][together], return_index=True)
            values = read_columns(self.term, draws, needed)[:, back[together]]
            sums[:, touched] += np.add.reduceat(values, first, axis=1)
        return sums
