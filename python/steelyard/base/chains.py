"""Which leading axes are chain and draw, told or inferred; doubt is an error, not a guess."""

from __future__ import annotations

from collections.abc import Mapping
from dataclasses import dataclass, field
from typing import Any

import numpy as np
import numpy.typing as npt

from steelyard.arrays import plain_array
from steelyard.base.names import close_names
from steelyard.errors import AmbiguousNameError, DrawsError, ShapeError

__all__ = ["Chains", "Found", "infer_chains", "refuse_unsaid_chain", "take_chain"]


@dataclass
class Found:
    """What one kind of input yields: arrays with their leading axes still on."""

    arrays: dict[str, npt.NDArray[Any]]
    dims: dict[str, tuple[str, ...]] = field(default_factory=dict)
    labels: dict[str, npt.NDArray[Any]] = field(default_factory=dict)
    # Whether the leading axes are (chain, draw): told by names, else to be inferred.
    has_chain_axis: bool | None = None
    chain: npt.NDArray[Any] | None = None
    chain_names: tuple[Any, ...] = ()


@dataclass(frozen=True)
class Chains:
    """Where chains start in the stack, and whether the input had a chain axis."""

    starts: npt.NDArray[np.int64]
    has_chain_axis: bool
    chain_names: tuple[Any, ...] = ()


def take_chain(columns: dict[str, Any], chain: Any, argument: str) -> npt.NDArray[Any] | None:
    """The chain of each draw: an array as given, or the entry that `chain` names, taken out."""
    if not isinstance(chain, str):
        return None if chain is None else plain_array(chain, "chain", "fiubUSO")
    if chain not in columns:
        raise DrawsError(
            "chain",
            f"an array of shape (n,), or a column of {argument}",
            repr(chain),
            close_names(chain, [str(name) for name in columns]),
        )
    return np.asarray(columns.pop(chain))


def refuse_unsaid_chain(found: Mapping[str, npt.NDArray[Any]], argument: str) -> None:
    """
    Refuse an entry called "chain" of which nobody said what it is.

    Taken for a parameter it would hide that there are several chains, and the Monte Carlo errors
    would miss the differences between them; taken for the chain a parameter would be lost.
    """
    column = found.get("chain")
    if column is not None and column.ndim == 1:
        raise AmbiguousNameError(
            "chain",
            f"to be told what the entry 'chain' of {argument} is",
            "nothing",
            'Pass chain="chain" if it holds the chain of each draw; if it is a parameter, rename '
            f"it, or pass chain=np.zeros({len(column)}, int) for draws of one chain.",
        )


def infer_chains(
    arrays: Mapping[str, npt.NDArray[Any]],
    has_chain_axis: bool | None,
    chain: npt.NDArray[Any] | None,
    argument: str,
    *,
    ordered: bool = True,
) -> Chains:
    """
    Chain structure of arrays that share their leading axes.

    Arrays of one axis are stacked draws. Otherwise the first two axes are (chain, draw) where
    all arrays agree on both; more chains than draws are refused, since swapped or stacked axes
    look just like that.
    """
    for name, array in arrays.items():
        if array.ndim == 0:
            raise DrawsError(
                f"{argument}[{name!r}]", "an array of draws", "a single number", "Pass all draws."
            )
    first_name, first = next(iter(arrays.items()))
    lengths = {name: array.shape[0] for name, array in arrays.items()}
    for name, length in lengths.items():
        if length != first.shape[0]:
            raise ShapeError(
                f"{argument}[{name!r}]",
                f"the leading axis of {first_name!r}, whose shape is {first.shape}",
                f"shape {arrays[name].shape}",
                "All parameters need the same draws in the same order.",
            )
    if has_chain_axis is None:
        has_chain_axis = chain is None and _agree_on_two_axes(arrays)
        if has_chain_axis:
            _refuse_many_chains(arrays[first_name], argument)
        if chain is None and not has_chain_axis:
            _refuse_other_lengths(arrays, first_name, argument)
    if has_chain_axis:
        return _with_axis(arrays, first_name, chain, argument)
    count = first.shape[0]
    _refuse_too_few(count, argument)
    if chain is None:
        return Chains(np.array([0, count], dtype=np.int64), False)
    return _from_index(chain, count, ordered)


# More chains than this are taken at the user's word only: a matrix of stacked draws of one vector
# parameter looks just like them.
_MOST_INFERRED = 64


def _refuse_many_chains(first: npt.NDArray[Any], argument: str) -> None:
    chains, length = first.shape[:2]
    if _MOST_INFERRED < chains <= length:
        raise AmbiguousNameError(
            argument,
            f"to be told whether shape {first.shape} is {chains} chains of {length} draws or "
            f"{chains} stacked draws",
            "no chain=",
            f"For stacked draws of one chain pass chain=np.zeros({chains}, int); for chains stack "
            "the draws and pass the chain of each.",
        )


def _agree_on_two_axes(arrays: Mapping[str, npt.NDArray[Any]]) -> bool:
    seconds = {array.shape[1] if array.ndim > 1 else None for array in arrays.values()}
    return len(seconds) == 1 and None not in seconds


def _refuse_other_lengths(
    arrays: Mapping[str, npt.NDArray[Any]], first_name: str, argument: str
) -> None:
    """
    Refuse (4, 250) beside (4, 200, 3): most likely chains of which some draws were left out.

    Taken for a stack they would be four draws of long vectors.
    """
    first = arrays[first_name].shape
    longer = [array.ndim > 1 and array.shape[1] > first[0] for array in arrays.values()]
    if not all(longer) and not (any(longer) and first[0] <= _MOST_INFERRED):
        return
    other = next(name for name, array in arrays.items() if array.shape[1:2] != first[1:2])
    raise ShapeError(
        f"{argument}[{other!r}]",
        f"the chain and draw axes of {first_name!r}, {first[:2]}",
        str(arrays[other].shape),
        "All parameters need the same draws in the same order; for stacked draws (n, …) of one "
        f"chain pass chain=np.zeros({first[0]}, int).",
    )


def _with_axis(
    arrays: Mapping[str, npt.NDArray[Any]],
    first_name: str,
    chain: npt.NDArray[Any] | None,
    argument: str,
) -> Chains:
    shape = arrays[first_name].shape[:2]
    for name, array in arrays.items():
        if array.shape[:2] != shape:
            raise ShapeError(
                f"{argument}[{name!r}]",
                f"the chain and draw axes of {first_name!r}, {shape}",
                str(array.shape[:2]),
                "All parameters need the same draws in the same order.",
            )
    if chain is not None:
        raise DrawsError(
            "chain",
            "nothing, since the draws have a chain axis",
            f"an array of shape {chain.shape}",
            "Leave chain= out, or pass stacked draws of shape (n, …).",
        )
    chains, length = shape
    _refuse_too_few(chains * length, argument)
    if chains > length:
        raise DrawsError(
            argument,
            "(chain, draw, …) arrays with at least as many draws as chains",
            f"{chains} chains of {length} draws from shape {arrays[first_name].shape}",
            "If the axes are swapped, swap them back; if the draws are stacked as (n, …) in one "
            f"chain, pass chain=np.zeros({chains}, int), else the chain of each draw.",
        )
    starts = np.arange(chains + 1, dtype=np.int64) * length
    return Chains(starts, True, tuple(range(chains)))


def _refuse_too_few(count: int, argument: str) -> None:
    if count < 2:
        raise DrawsError(
            argument,
            "at least two draws",
            "no draw" if count == 0 else "one draw, which has no Monte Carlo error",
            "Pass all draws of the fit.",
        )


def _from_index(chain: npt.NDArray[Any], count: int, ordered: bool) -> Chains:
    if chain.shape != (count,):
        raise ShapeError(
            "chain",
            f"the chain of each of {count} draws, shape ({count},)",
            f"shape {chain.shape}",
            "Give one entry a draw.",
        )
    _refuse_missing(chain)
    breaks = np.flatnonzero(chain[1:] != chain[:-1]) + 1
    starts = np.concatenate([[0], breaks, [count]]).astype(np.int64)
    names = chain[starts[:-1]].tolist()
    scattered = sorted({str(n) for n in names if names.count(n) > 1})
    if scattered and not ordered:
        # Errors of unordered draws do not ask which chain they came from.
        return Chains(np.array([0, count], dtype=np.int64), False)
    if scattered:
        raise DrawsError(
            "chain",
            "the draws of each chain together, in the order they were drawn",
            f"rows of chain {', '.join(scattered[:5])} in several places",
            "Sort by chain, keeping the order within each; or pass ordered=False if there is none.",
        )
    return Chains(starts, False, tuple(names))


def _refuse_missing(chain: npt.NDArray[Any]) -> None:
    # None and NaN differ from themselves or from all others: each would start a chain of its own.
    bad = np.array([entry is None for entry in chain]) if chain.dtype == np.object_ else None
    if chain.dtype.kind in "fc":
        bad = ~np.isfinite(chain)
    if bad is not None and bad.any():
        raise DrawsError(
            "chain",
            "a number or text for every draw",
            f"{int(bad.sum())} missing, first at draw {int(np.argmax(bad))}",
            "Say which chain those draws belong to.",
        )
