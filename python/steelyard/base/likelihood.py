"""Likelihood terms: arrays or callables, read in blocks of draws, never copied whole."""

from __future__ import annotations

from collections.abc import Callable, Iterator, Mapping
from dataclasses import dataclass, field
from types import MappingProxyType
from typing import Any

import numpy as np
import numpy.typing as npt

from steelyard.arrays import plain_array
from steelyard.base.draws import Array, Draws
from steelyard.base.shapes import has_two_axes
from steelyard.errors import ArgumentTypeError, LikelihoodError, ShapeError

__all__ = ["LoglikTerm", "called_term", "read_loglik", "read_loglik_term"]

# Values held in memory at a time, in float64: 8 MB.
_BLOCK_VALUES = 1 << 20


@dataclass(frozen=True, eq=False)
class LoglikTerm:
    """
    One likelihood term.

    Attributes
    ----------
    name : str
        Its name.
    source : array or callable
        ``(chain, draw, *obs)`` or ``(n, *obs)`` log likelihood values, or a callable that gives
        them for a block of draws.
    obs_shape : tuple of int
        Shape of the observations; empty for a total.
    has_chain_axis : bool
        Whether an array leads with (chain, draw).
    dims : tuple of str
        Names of the observation dimensions, where the input named them.
    labels : mapping of str to numpy.ndarray
        Labels along those dimensions.
    """

    name: str
    source: Any
    obs_shape: tuple[int, ...]
    has_chain_axis: bool = False
    dims: tuple[str, ...] = ()
    labels: Mapping[str, npt.NDArray[Any]] = field(default_factory=dict)

    @property
    def is_total(self) -> bool:
        """Whether the term has no observation axes: it can be powered or swapped only."""
        return self.obs_shape == ()

    @property
    def observations(self) -> int:
        """Number of observations; 1 for a total."""
        return int(np.prod(self.obs_shape, dtype=np.int64))

    def blocks(self, draws: Draws) -> Iterator[tuple[slice, Array]]:
        """Pairs of a slice of the stack and its values ``(rows, observations)``, checked."""
        rows = max(1, _BLOCK_VALUES // max(1, self.observations))
        for chain in range(draws.chains):
            begin, end = int(draws.starts[chain]), int(draws.starts[chain + 1])
            for start in range(begin, end, rows):
                part = slice(start, min(start + rows, end))
                block = self._read(draws, chain, begin, part)
                self._refuse_impossible(block, draws, part.start)
                yield part, block

    def total(self, draws: Draws) -> Array:
        """Log likelihood of all observations together at each draw, ``(n,)``."""
        total = np.empty(draws.size)
        for part, block in self.blocks(draws):
            total[part] = block.sum(axis=1)
        return total

    def _read(self, draws: Draws, chain: int, begin: int, part: slice) -> Array:
        if callable(self.source):
            values: Any = _call(self.source, draws, part, self.name)
            wanted = (part.stop - part.start, *self.obs_shape)
            if values.shape != wanted:
                raise ShapeError(
                    f"loglik[{self.name!r}]",
                    f"log likelihood values of shape {wanted} for {wanted[0]} draws",
                    str(values.shape),
                    "The callable must give the same observations for every block of draws.",
                )
        elif self.has_chain_axis:
            values = self._stored((chain, slice(part.start - begin, part.stop - begin)))
        else:
            values = self._stored(part)
        block = values.reshape(part.stop - part.start, self.observations)
        return np.require(block, np.float64, ["C", "A"])

    def _stored(self, place: Any) -> npt.NDArray[Any]:
        try:
            return np.asarray(self.source[place])
        except (OSError, ValueError, RuntimeError) as error:
            if isinstance(self.source, np.ndarray):
                raise
            raise LikelihoodError(
                f"loglik[{self.name!r}]",
                "log likelihood values that can be read",
                f"a failure to read them: {error}",
                "The file they come from may be damaged or moved: copy it again.",
            ) from error

    def _refuse_impossible(self, block: Array, draws: Draws, start: int) -> None:
        bad = np.isnan(block) | (block == np.inf)
        if not bad.any():
            return
        row, column = (int(i[0]) for i in np.nonzero(bad))
        place = np.unravel_index(column, self.obs_shape) if self.obs_shape else ()
        raise LikelihoodError(
            f"loglik[{self.name!r}]",
            "log likelihood values that are finite or −inf",
            f"{block[row, column]} at {draws.where(start + row)}"
            + (f", observation {', '.join(str(int(i)) for i in place)}" if place else ""),
            f"{int(bad.sum())} such values in this block of draws; mend the log likelihood there.",
        )


def called_term(source: Any) -> bool:
    """Whether a source is called with draws rather than read."""
    return callable(source) and not hasattr(source, "shape")


def _call(source: Callable[..., Any], draws: Draws, part: slice, name: str) -> npt.NDArray[Any]:
    block = {k: v[part] for k, v in draws.values_by_name.items()}
    values = plain_array(source(MappingProxyType(block)), f"loglik[{name!r}]", "fiub")
    if values.dtype.kind not in "fiu" or values.ndim == 0:
        raise ArgumentTypeError(
            f"loglik[{name!r}]",
            "an array of real numbers from the callable, draws first",
            f"dtype {values.dtype}, shape {values.shape}",
            "Return log likelihood values of shape (n, *obs).",
        )
    return values


def read_loglik(loglik: Any, draws: Draws) -> dict[str, LoglikTerm] | None:
    """Read the likelihood of a fit: one term, or a mapping of named terms; None is not stated."""
    if loglik is None:
        return None
    if hasattr(loglik, "data_vars"):
        loglik = dict(loglik.data_vars)
    if not isinstance(loglik, Mapping):
        return {"likelihood": read_loglik_term("likelihood", loglik, draws, "loglik")}
    for name in loglik:
        if not isinstance(name, str) or not name:
            raise ArgumentTypeError(
                "loglik", "names of terms that are texts", repr(name), "Rename the term."
            )
    return {k: read_loglik_term(k, v, draws, f"loglik[{k!r}]") for k, v in loglik.items()} or None


def read_loglik_term(name: str, source: Any, draws: Draws, argument: str) -> LoglikTerm:
    """Read one likelihood term; values are checked block by block when they are used."""
    if callable(source) and not hasattr(source, "shape"):
        first = _call(source, draws, slice(0, 1), name)
        if first.shape[0] != 1:
            raise ShapeError(
                argument,
                "values of shape (1, *obs) from the callable for one draw",
                str(first.shape),
                "The callable must keep the draw axis first.",
            )
        return LoglikTerm(name, source, first.shape[1:])
    dims: tuple[str, ...] = ()
    labels: dict[str, npt.NDArray[Any]] = {}
    if hasattr(source, "dims") and hasattr(source, "transpose"):
        source, dims, labels = _from_xarray(source, argument)
    elif hasattr(type(source), "columns") or hasattr(source, "__arrow_c_stream__"):
        raise ArgumentTypeError(
            argument,
            "an array, draws first",
            f"a {type(source).__name__}",
            "Pass frame.to_numpy(), its rows in the order of the stacked draws.",
        )
    elif (
        isinstance(source, np.ma.MaskedArray)
        or not hasattr(source, "shape")
        or (hasattr(source, "__dlpack__") and not isinstance(source, np.ndarray))
    ):
        source = plain_array(source, argument, "fiu")
    _refuse_other_numbers(source, argument)
    shape = tuple(int(s) for s in source.shape)
    two = has_two_axes(shape, draws, argument)
    obs_shape = shape[2:] if two else shape[1:]
    if 0 in obs_shape:
        raise ShapeError(argument, "at least one observation", str(shape), "Leave the term out.")
    return LoglikTerm(name, source, obs_shape, two, dims, labels)


def _refuse_other_numbers(source: Any, argument: str) -> None:
    """Whatever keeps its values elsewhere (a memmap, dask) is judged by its dtype alone."""
    try:
        kind = np.dtype(source.dtype).kind
    except (TypeError, AttributeError):
        kind = "O"
    if kind not in "fiu":
        came = f"dtype {getattr(source, 'dtype', type(source).__name__)}"
        raise ArgumentTypeError(argument, "real numbers", came, "Convert to float64 or float32.")


def _from_xarray(source: Any, argument: str) -> tuple[Any, tuple[str, ...], dict[str, Any]]:
    draw = next((d for d in ("draw", "sample") if d in source.dims), None)
    if draw is None:
        raise LikelihoodError(
            argument,
            "a dimension 'draw' (and 'chain'), or 'sample'",
            str(tuple(source.dims)),
            "Rename the dimensions.",
        )
    lead = ("chain", draw) if "chain" in source.dims else (draw,)
    ordered = source.transpose(*lead, ...)
    dims = tuple(str(d) for d in ordered.dims[len(lead) :])
    labels = {d: np.asarray(source.coords[d].values) for d in dims if d in source.coords}
    # `data` would load what xarray opened lazily; a Variable is read by the block, like an array.
    return ordered.variable if ordered.chunks is None else ordered.data, dims, labels
