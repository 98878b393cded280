"""Columns of a likelihood term: all draws of some observations, read by the block, checked."""

from __future__ import annotations

import mmap
from collections.abc import Callable, Iterator
from typing import Any

import numpy as np
import numpy.typing as npt

from steelyard.arrays import plain_array
from steelyard.base import Draws
from steelyard.base.draws import Array
from steelyard.base.likelihood import LoglikTerm
from steelyard.errors import ArgumentError, ArgumentTypeError, LikelihoodError, ShapeError

__all__ = ["ObservationBlocks", "by_observation", "read_columns", "width_of"]

Positions = npt.NDArray[np.int64]

# Values held in float64 at a time: 4 MB. About ten arrays of this size live at once.
_BLOCK_VALUES = 1 << 19
# Values that the kernel gets at a time: views of what lies in memory; copies of what does not.
_KERNEL_VALUES = 1 << 23
_KERNEL_COPIED = 1 << 21
# The kernel works on so many columns in one go.
_KERNEL_COLUMNS = 128
# A page of a memory map that is touched may bring up to 2 MB of its row with it (large folios, seen
# on Linux 6.18): rows are read so many bytes at a time, and let go.
_MAPPED_PIECE = 1 << 21
_MAPPED_BYTES = 1 << 24
# A callable gives all observations of some draws: it is called again for every block of columns,
# so that its blocks are wider.
_BLOCK_CALLED = 1 << 23


class ObservationBlocks:
    """Log likelihood values made on demand, by blocks of observations; see `by_observation`."""

    dtype = np.dtype(np.float64)

    def __init__(self, function: Callable[[slice], Any], shape: tuple[int, int]) -> None:
        self.function = function
        self.shape = shape

    def __getitem__(self, place: Any) -> npt.NDArray[Any]:
        rows, columns = place if isinstance(place, tuple) else (place, slice(None))
        start, stop, _ = columns.indices(self.shape[1])
        width = max(1, _BLOCK_VALUES // max(1, self.shape[0]))
        parts = [
            self._made(slice(begin, min(begin + width, stop)))[rows]
            for begin in range(start, stop, width)
        ]
        return np.concatenate(parts, axis=1)

    def _made(self, part: slice) -> npt.NDArray[Any]:
        values = plain_array(self.function(part), "by_observation", "fiu")
        wanted = (self.shape[0], part.stop - part.start)
        if values.shape != wanted:
            raise ShapeError(
                "by_observation",
                f"values of shape {wanted} for observations {part.start} to {part.stop - 1}",
                str(values.shape),
                "Return all draws of the observations asked for, draws first.",
            )
        return values


def by_observation(
    function: Callable[[slice], Any], draws: int, observations: int
) -> ObservationBlocks:
    """
    A likelihood term whose values are made by blocks of observations.

    Parameters
    ----------
    function : callable
        Gets a slice of observations and returns log likelihood values ``(draws, observations in
        the slice)``, chain after chain.
    draws : int
        Number of draws, all chains together.
    observations : int
        Number of observations.

    Returns
    -------
    ObservationBlocks
        What ``Fit`` takes as a likelihood term.

    Raises
    ------
    ArgumentTypeError, ArgumentError
        For something that cannot be called, or a count below 1.

    Examples
    --------
    >>> import numpy as np, steelyard as sy
    >>> from steelyard.leaving_out import by_observation
    >>> rate = np.random.default_rng(1).normal(0.10, 0.01, size=500)
    >>> readings = np.linspace(0.05, 0.15, 2000)
    >>> def values(part):
    ...     return -0.5 * ((readings[part] - rate[:, None]) / 0.03) ** 2
    >>> fit = sy.Fit({"rate": rate}, loglik=by_observation(values, 500, 2000))
    """
    if not callable(function):
        raise ArgumentTypeError(
            "function", "a callable", type(function).__name__, "Pass a function of a slice."
        )
    for name, count in (("draws", draws), ("observations", observations)):
        if not isinstance(count, int | np.integer) or isinstance(count, bool) or count < 1:
            raise ArgumentError(name, "an integer of at least 1", repr(count), "Count them.")
    return ObservationBlocks(function, (int(draws), int(observations)))


def width_of(term: LoglikTerm, draws: Draws, *, checked: bool = True) -> int:
    """How many columns are read at a time; unchecked ones are for the kernel."""
    source = term.source
    if callable(source) and not hasattr(source, "shape"):
        return max(1, _BLOCK_CALLED // draws.size)
    if checked:
        return max(1, _BLOCK_VALUES // draws.size)
    copied = not isinstance(source, np.ndarray) or _read_only_map(source) is not None
    width = max(1, (_KERNEL_COPIED if copied else _KERNEL_VALUES) // draws.size)
    return width // _KERNEL_COLUMNS * _KERNEL_COLUMNS or width


def read_columns(
    term: LoglikTerm, draws: Draws, positions: Positions, *, checked: bool = True
) -> npt.NDArray[Any]:
    """
    Values ``(n, k)`` of the observations at flat, ascending `positions`.

    Nothing but these columns is copied, whatever the order of the array in memory. Checked values
    are float64; without a check they may be float32, and a view of the source.
    """
    source = term.source
    if callable(source) and not hasattr(source, "shape"):
        parts = [block[:, positions] for _, block in term.blocks(draws)]
        values: npt.NDArray[Any] = np.concatenate(parts)
    elif isinstance(source, np.ndarray):
        values = _from_memory(source, term, draws, positions)
    else:
        values = _from_elsewhere(source, term, draws, positions)
    if not checked:
        kept = values.dtype in (np.dtype(np.float32), np.dtype(np.float64))
        return np.require(values, None if kept else np.float64, ["A"])
    block = np.require(values, np.float64, ["C", "A"])
    _refuse_impossible(block, term, draws, positions)
    return block


def _from_memory(
    source: npt.NDArray[Any], term: LoglikTerm, draws: Draws, positions: Positions
) -> npt.NDArray[Any]:
    if not source.flags.c_contiguous:
        lead = 2 if term.has_chain_axis else 1
        values = source[(slice(None),) * lead + _place(positions, term.obs_shape)]
        return values.reshape(draws.size, len(positions))
    rows, columns = source.reshape(draws.size, -1), _run(positions)  # a view
    opened = _read_only_map(source)
    if opened is None:
        return rows[:, columns]
    kept = source.dtype == np.dtype(np.float32)
    block = np.empty((draws.size, len(positions)), dtype=np.float32 if kept else np.float64)
    at_once = max(1, _MAPPED_BYTES // min(max(rows.strides[0], 1), _MAPPED_PIECE))
    for start in range(0, draws.size, at_once):
        part = slice(start, start + at_once)
        block[part] = rows[part, columns]
        opened.madvise(mmap.MADV_DONTNEED)
    return block


def _from_elsewhere(
    source: Any, term: LoglikTerm, draws: Draws, positions: Positions
) -> npt.NDArray[Any]:
    """Dask arrays, lazy variables of xarray, and anything else that gives slices."""
    lead = 2 if term.has_chain_axis else 1
    try:
        if hasattr(source, "isel"):
            values = _from_variable(source, lead, positions, term.obs_shape)
        elif hasattr(source, "dask"):
            values = source.reshape(draws.size, -1)[:, _run(positions)]
        elif len(term.obs_shape) == 1:
            whole = (slice(None),) * lead
            values = np.concatenate(
                [np.asarray(source[(*whole, part)]) for part in _runs(positions)], axis=-1
            )
        else:
            values = np.concatenate(
                [block[:, positions] for _, block in term.blocks(draws)], axis=0
            )
        return np.asarray(values).reshape(draws.size, len(positions))
    except (OSError, ValueError, RuntimeError) as error:
        if isinstance(error, ShapeError | LikelihoodError):
            raise
        raise LikelihoodError(
            f"loglik[{term.name!r}]",
            "log likelihood values that can be read",
            f"a failure to read them: {error}",
            "The file they come from may be damaged or moved: copy it again.",
        ) from error


def _from_variable(source: Any, lead: int, positions: Positions, shape: tuple[int, ...]) -> Any:
    dims = source.dims[lead:]
    if len(dims) == 1:
        return source.isel({dims[0]: _run(positions)}).values
    points = np.unravel_index(positions, shape)
    variable = type(source)
    chosen = {d: variable("observation left out", p) for d, p in zip(dims, points, strict=True)}
    return source.isel(chosen).transpose(*source.dims[:lead], ...).values


def _place(positions: Positions, shape: tuple[int, ...]) -> tuple[Any, ...]:
    if len(shape) == 1:
        return (_run(positions),)
    return tuple(np.unravel_index(positions, shape))


def _run(positions: Positions) -> Any:
    """A slice where the positions follow one another: it needs no copy."""
    first, last = int(positions[0]), int(positions[-1])
    return slice(first, last + 1) if last - first + 1 == len(positions) else positions


def _runs(positions: Positions) -> Iterator[slice]:
    breaks = np.flatnonzero(np.diff(positions) != 1) + 1
    for run in np.split(positions, breaks):
        yield slice(int(run[0]), int(run[-1]) + 1)


def _read_only_map(source: npt.NDArray[Any]) -> mmap.mmap | None:
    """
    The memory map behind an array, if its pages can be given back: else 4 GB read count as ours.

    One opened copy-on-write is left alone: its pages may hold changes.
    """
    read_only = False
    link: Any = source
    while isinstance(link, np.ndarray):
        read_only |= isinstance(link, np.memmap) and link.mode == "r"
        link = link.base
    found = read_only and isinstance(link, mmap.mmap) and hasattr(mmap, "MADV_DONTNEED")
    return link if found else None


def _refuse_impossible(block: Array, term: LoglikTerm, draws: Draws, positions: Positions) -> None:
    bad = np.isnan(block) | (block == np.inf)
    if bad.any():
        row, column = (int(i[0]) for i in np.nonzero(bad))
        raise LikelihoodError(
            f"loglik[{term.name!r}]",
            "log likelihood values that are finite or −inf",
            f"{block[row, column]} at {draws.where(row)}, "
            f"observation {_words(int(positions[column]), term)}",
            f"{int(bad.sum())} such values in this block; mend the log likelihood there.",
        )
    never = (block == -np.inf).all(axis=0)
    if never.any():
        column = int(np.argmax(never))
        raise LikelihoodError(
            f"loglik[{term.name!r}]",
            "a draw under which each observation is possible",
            f"−inf for every draw at observation {_words(int(positions[column]), term)}",
            "No draw can have come from a fit to it: look at the data and the model there.",
        )


def _words(position: int, term: LoglikTerm) -> str:
    return ", ".join(str(int(i)) for i in np.unravel_index(position, term.obs_shape))
