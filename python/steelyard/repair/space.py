"""The unconstrained space of the parameters, derived from the supports of their prior terms."""

from __future__ import annotations

from collections.abc import Iterable, Mapping
from dataclasses import dataclass, field
from types import MappingProxyType

import numpy as np
import numpy.typing as npt

from steelyard.base import Base, Draws
from steelyard.base.draws import Array
from steelyard.base.names import Reference
from steelyard.base.priors import PriorTerm
from steelyard.errors import DrawsError, PriorError, ShapeError
from steelyard.repair.covering import Cover, blocks_of
from steelyard.repair.transforms import Block

__all__ = ["Points", "Space", "space_of"]


@dataclass(frozen=True, eq=False)
class Points(Draws):
    """Draws at new points; errors name the point by its values."""

    def where(self, draw: int) -> str:
        """
        Words for one point.

        Parameters
        ----------
        draw : int
            Position in the stack.

        Returns
        -------
        str
            Such as ``"the point mu=0.1, tau=0.03"``.
        """
        parts = []
        for name, values in self.values_by_name.items():
            flat = values[draw].reshape(-1)
            text = ", ".join(f"{v:.6g}" for v in flat[:4]) + (", …" if flat.size > 4 else "")
            parts.append(f"{name}=[{text}]" if flat.size > 1 else f"{name}={text}")
            if len(parts) == 8:
                break
        return f"the point {', '.join(parts)}"


@dataclass(frozen=True, eq=False)
class Space:
    """
    Parameters as coordinates on the whole real space.

    Attributes
    ----------
    shapes : mapping of str to tuple of int
        Shapes of the parameters, in order.
    blocks : tuple of Block
        How they are carried, limits that others name first.
    template : Draws
        Names of dimensions and labels.
    """

    shapes: Mapping[str, tuple[int, ...]]
    blocks: tuple[Block, ...]
    template: Draws
    offsets: Mapping[str, int] = field(default_factory=dict)

    @property
    def size(self) -> int:
        """Number of coordinates d."""
        return sum(block.size for block in self.blocks)

    @property
    def elements(self) -> int:
        """Number of elements of all parameters."""
        return sum(int(np.prod(s, dtype=np.int64)) for s in self.shapes.values())

    def free(self, draws: Draws) -> Array:
        """
        Coordinates of draws.

        Parameters
        ----------
        draws : Draws
            All parameters, ``(n, *shape)`` each.

        Returns
        -------
        numpy.ndarray
            Shape ``(n, d)``.

        Raises
        ------
        DrawsError
            For a draw on a limit of its support, which has no coordinate.
        """
        flat = np.concatenate(
            [draws.values_by_name[n].reshape(draws.size, -1) for n in self.shapes], axis=1
        )
        parts = []
        for block in self.blocks:
            part = block.to_free(flat[:, block.columns], lambda name: self._column(name, flat))
            bad = ~np.isfinite(part)
            if bad.any():
                row = int(np.argmax(bad.any(axis=1)))
                raise DrawsError(
                    f"draws of {self._owner(int(block.columns[0]))}",
                    "values inside the support of their prior, not on its limit",
                    f"{int(bad.any(axis=1).sum())} on a limit or beyond, first at "
                    f"{draws.where(row)}",
                    "Such draws have no place on the unconstrained scale: move them off the limit.",
                )
            parts.append(part)
        return np.ascontiguousarray(np.concatenate(parts, axis=1))

    def points(self, x: Array) -> tuple[Points, Array]:
        """
        Parameters at coordinates, and the log Jacobian of getting there.

        Parameters
        ----------
        x : numpy.ndarray
            Coordinates ``(n, d)``.

        Returns
        -------
        tuple of Points and numpy.ndarray
            The parameters as one chain, and ``log |det ∂θ/∂x|``, shape ``(n,)``.
        """
        if x.ndim != 2 or x.shape[1] != self.size:
            raise ShapeError("x", f"shape (n, {self.size})", str(x.shape), "One row a point.")
        flat, log_jacobian, start = np.empty((len(x), self.elements)), np.zeros(len(x)), 0
        for block in self.blocks:
            part = np.ascontiguousarray(x[:, start : start + block.size])
            values, log_slope = block.from_free(part, lambda name: self._column(name, flat))
            flat[:, block.columns] = values
            log_jacobian += log_slope
            start += block.size
        values_by_name = {}
        for name, shape in self.shapes.items():
            begin = self.offsets[name]
            width = int(np.prod(shape, dtype=np.int64))
            values_by_name[name] = np.ascontiguousarray(flat[:, begin : begin + width]).reshape(
                len(x), *shape
            )
        starts = np.array([0, len(x)], dtype=np.int64)
        made = Points(values_by_name, starts, False, self.template.dims, self.template.labels)
        return made, log_jacobian

    def _column(self, name: str, flat: Array) -> Array:
        """Values of a parameter or an element named by a limit, from those known so far."""
        found = self.template.find(name)
        whole = flat[:, self._places(found)]
        shape = self.shapes[found.name][len(found.index) :]
        return whole.reshape(len(flat), *shape)

    def _places(self, found: Reference) -> npt.NDArray[np.int64]:
        shape = self.shapes[found.name]
        grid = np.arange(int(np.prod(shape, dtype=np.int64))).reshape(shape)
        return np.asarray(grid[found.index]).reshape(-1) + self.offsets[found.name]

    def _owner(self, column: int) -> str:
        return max((o, name) for name, o in self.offsets.items() if o <= column)[1]


def space_of(
    base: Base, terms: Mapping[str, PriorTerm] | None = None, ascending: Iterable[str] = ()
) -> Space:
    """
    The space of a base, from its own prior terms or from those of a target.

    Parameters
    ----------
    base : Base
        The base.
    terms : mapping of str to PriorTerm, optional
        Prior terms, those of the base by default.
    ascending : iterable of str, optional
        Vectors that the model keeps in ascending order.

    Returns
    -------
    Space
        The space.

    Raises
    ------
    PriorError
        For a parameter or element without prior term, or one that cannot be carried.
    """
    stated = terms if terms is not None else base.prior
    if not stated:
        raise PriorError(
            "repair",
            "a fit whose prior is stated",
            "a fit without prior",
            "Pass prior={…} to Fit, one term for every parameter; a flat prior is sy.Flat().",
        )
    shapes, offsets, total = {}, {}, 0
    for name in base.parameters:
        shapes[name] = base.draws.values_by_name[name].shape[1:]
        offsets[name] = total
        total += int(np.prod(shapes[name], dtype=np.int64))
    cover = Cover(base.draws, MappingProxyType(shapes), MappingProxyType(offsets), total)
    blocks = blocks_of(cover, stated, tuple(ascending))
    return Space(MappingProxyType(shapes), tuple(blocks), base.draws, MappingProxyType(offsets))
