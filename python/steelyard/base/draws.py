"""Draws: named arrays `(n, *shape)`, stacked chain after chain."""

from __future__ import annotations

from collections.abc import Iterator, Mapping
from dataclasses import dataclass, field
from functools import cached_property
from typing import Any

import numpy as np
import numpy.typing as npt

from steelyard.arrays import Frozen, ReadOnly
from steelyard.base.names import Reference, close_names, find
from steelyard.base.pooling import Pooling
from steelyard.errors import UnknownNameError

__all__ = ["Array", "Draws", "element"]

Array = npt.NDArray[np.float64]


@dataclass(frozen=True, eq=False)
class Draws(Frozen, Mapping[str, Array]):
    """
    Named posterior draws.

    A read-only mapping from parameter names to arrays ``(n, *shape)``, chain after chain. It is
    built by :class:`steelyard.Fit` or by ``Answer.resample``, not by hand.

    Attributes
    ----------
    values_by_name : mapping of str to numpy.ndarray
        Read-only float64 arrays of shape ``(n, *shape)``.
    starts : numpy.ndarray
        Where each chain starts in the stack, and n at the end; shape ``(chains + 1,)``.
    has_chain_axis : bool
        Whether results are shown as ``(chain, draw, …)``: the input had a chain axis and the
        chains are equally long.
    dims : mapping of str to tuple of str
        Names of the trailing dimensions of a parameter, where the input named them.
    labels : mapping of str to numpy.ndarray
        Labels along a named dimension.
    chain_names : tuple
        What the input called the chains.
    pooling : Pooling or None
        How the draws were pooled, where they come from several fits.
    """

    values_by_name: Mapping[str, Array]
    starts: npt.NDArray[np.int64]
    has_chain_axis: bool = False
    dims: Mapping[str, tuple[str, ...]] = field(default_factory=dict)
    labels: Mapping[str, npt.NDArray[Any]] = field(default_factory=dict)
    chain_names: tuple[Any, ...] = ()
    pooling: Pooling | None = None

    def __post_init__(self) -> None:
        super().__post_init__()
        for name in ("values_by_name", "labels"):
            object.__setattr__(self, name, ReadOnly(getattr(self, name)))

    def __getitem__(self, name: str) -> Array:
        if name in self.values_by_name:
            return self.values_by_name[name]
        return self.look_up(name)

    def __iter__(self) -> Iterator[str]:
        return iter(self.values_by_name)

    def __len__(self) -> int:
        return len(self.values_by_name)

    def get(self, name: str, default: Any = None) -> Any:
        """
        Draws of a parameter or an element, or `default` where there is none.

        Parameters
        ----------
        name : str
            The name.
        default : object, optional
            What to return where it is not there.

        Returns
        -------
        numpy.ndarray or object
            Shape ``(n, *shape)``, or `default`.
        """
        try:
            return self[name]
        except UnknownNameError:
            return default

    def __contains__(self, name: object) -> bool:
        return name in self.values_by_name

    @property
    def size(self) -> int:
        """Number of draws n, all chains together."""
        return int(self.starts[-1])

    @property
    def chains(self) -> int:
        """Number of chains."""
        return len(self.starts) - 1

    @property
    def chain(self) -> npt.NDArray[np.int64]:
        """Position of the chain that each draw belongs to, shape ``(n,)``."""
        return np.repeat(np.arange(self.chains), np.diff(self.starts))

    @cached_property
    def repeats(self) -> npt.NDArray[np.intp] | None:
        """Which draws are the same draw again: a number for each distinct one, or None."""
        if not len(self.values_by_name):
            return None
        rows = np.concatenate(
            [v.reshape(self.size, -1) for v in self.values_by_name.values()], axis=1
        )
        keys = np.ascontiguousarray(rows).view(np.dtype((np.void, rows.itemsize * rows.shape[1])))
        _, groups = np.unique(keys.reshape(-1), return_inverse=True)
        return groups if int(groups.max()) + 1 < self.size else None

    def find(self, name: str, argument: str = "name") -> Reference:
        """
        The parameter, or the element of one, that a text names.

        Parameters
        ----------
        name : str
            The text.
        argument : str
            What an error calls it.

        Returns
        -------
        Reference
            Name and index.
        """
        shapes = {k: v.shape[1:] for k, v in self.values_by_name.items()}
        return find(name, shapes, self.dims, self.labels, argument)

    def look_up(self, name: str, argument: str = "name") -> Array:
        """
        Draws of a parameter (``"rate"``) or of an element (``"rate[3]"``).

        Parameters
        ----------
        name : str
            The name; integers in brackets are positions from 0.
        argument : str
            What an error calls it.

        Returns
        -------
        numpy.ndarray
            Shape ``(n, *shape)``.

        Raises
        ------
        UnknownNameError
            Where there is no such parameter or position.
        AmbiguousNameError
            Where an integer could be a position or a label.
        """
        found = self.find(name, argument)
        return element(self.values_by_name[found.name], found.index)

    def shaped(self, values: Array) -> Array:
        """
        Stacked values shown with a chain axis, where the chains allow it.

        Parameters
        ----------
        values : numpy.ndarray
            Shape ``(n, …)``.

        Returns
        -------
        numpy.ndarray
            A view ``(chain, draw, …)``, or the values as they are.
        """
        if not self.has_chain_axis:
            return values
        return values.reshape(self.chains, -1, *values.shape[1:])

    def where(self, draw: int) -> str:
        """
        Words for the place of one draw of the stack.

        Parameters
        ----------
        draw : int
            Position in the stack.

        Returns
        -------
        str
            Such as ``"chain 1, draw 17"``.
        """
        chain = int(np.searchsorted(self.starts, draw, side="right")) - 1
        if self.chains == 1:
            return f"draw {draw}"
        return f"chain {chain}, draw {draw - int(self.starts[chain])}"

    def take(self, rows: npt.NDArray[np.int64]) -> Draws:
        """
        Some of the draws, chains kept, as a new stack.

        Parameters
        ----------
        rows : numpy.ndarray
            Ascending positions in the stack; a position may stand several times.

        Returns
        -------
        Draws
            The draws there.
        """
        counts = np.bincount(self.chain[rows], minlength=self.chains)
        kept = np.flatnonzero(counts)
        starts = np.concatenate([[0], np.cumsum(counts[kept])]).astype(np.int64)
        names = self.chain_names or tuple(range(self.chains))
        values = {k: v[rows] for k, v in self.values_by_name.items()}
        return Draws(
            values, starts, False, self.dims, self.labels, tuple(names[int(c)] for c in kept)
        )

    def to_xarray(self) -> Any:
        """
        The draws as an xarray Dataset.

        Returns
        -------
        xarray.Dataset
            Dimensions ``chain`` and ``draw`` where the chains are equally long and the input had
            a chain axis, else ``draw`` with a coordinate ``chain``.

        Raises
        ------
        MissingExtraError
            Without xarray.
        """
        from steelyard.base.optional import xarray

        lead = ("chain", "draw") if self.has_chain_axis else ("draw",)
        variables = {
            name: ((*lead, *self.dims_of(name)), self.shaped(values))
            for name, values in self.values_by_name.items()
        }
        coords: dict[str, Any] = dict(self.labels)
        if not self.has_chain_axis:
            names = self.chain_names or tuple(range(self.chains))
            coords["chain"] = ("draw", np.repeat(np.array(names), np.diff(self.starts)))
        return xarray().Dataset(variables, coords=coords)

    def dims_of(self, name: str) -> tuple[str, ...]:
        """
        Names of a parameter's trailing dimensions, made up where the input gave none.

        Parameters
        ----------
        name : str
            The parameter.

        Returns
        -------
        tuple of str
            One for each axis after the draws.
        """
        if name not in self.values_by_name:
            raise UnknownNameError(
                "name", "a parameter", repr(name), close_names(name, self.values_by_name)
            )
        axes = self.values_by_name[name].ndim - 1
        return self.dims.get(name, tuple(f"{name}_{axis}" for axis in range(axes)))

    def __repr__(self) -> str:
        shapes = ", ".join(
            f"{name}{list(v.shape[1:]) if v.ndim > 1 else ''}"
            for name, v in self.values_by_name.items()
        )
        chains = "1 chain" if self.chains == 1 else f"{self.chains} chains"
        return f"<Draws: {self.size} in {chains}: {shapes}>"


def element(values: Array, index: tuple[int, ...]) -> Array:
    """Draws of one element of a parameter; all of it for an empty index."""
    place: tuple[Any, ...] = (slice(None), *index)
    return np.asarray(values[place])
