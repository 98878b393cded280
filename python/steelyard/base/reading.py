"""The one door for draws: whatever holds them becomes :class:`Draws`, nothing dropped."""

from __future__ import annotations

import os
from collections.abc import Iterable, Mapping
from typing import Any

import numpy as np
import numpy.typing as npt

from steelyard.arrays import plain_array
from steelyard.base.chains import Chains, Found, infer_chains, refuse_unsaid_chain, take_chain
from steelyard.base.draws import Array, Draws
from steelyard.base.frames import from_frame, looks_like_frame
from steelyard.base.labelled import from_labelled, is_labelled
from steelyard.errors import ArgumentError, ArgumentTypeError, DrawsError, ShapeError

__all__ = ["read_draws"]


def read_draws(
    source: Any,
    names: Iterable[str] | None = None,
    chain: Any = None,
    argument: str = "draws",
    *,
    ordered: bool = True,
) -> Draws:
    """
    Read draws from a mapping, an xarray Dataset, a data frame, an array or other draws.

    Parameters
    ----------
    source : mapping, xarray.Dataset, data frame, array_like, Draws
        ``(chain, draw, *shape)`` or ``(n, *shape)`` arrays; or one ``(n, d)`` or
        ``(chain, draw, d)`` array with `names`.
    names : iterable of str, optional
        Names of the last axis of an array; other sources have names already.
    chain : array_like or str, optional
        The chain of each stacked draw, shape ``(n,)``, chains contiguous; or the column of a
        frame, the entry of a mapping, or the coordinate along the draws that holds it.
    argument : str
        What an error calls the source.
    ordered : bool
        Whether the draws of a chain stand in the order they were drawn; unordered ones may have
        the rows of their chains scattered.

    Returns
    -------
    Draws
        Float64, stacked chain after chain.

    Raises
    ------
    DrawsError, ShapeError, ArgumentError, ArgumentTypeError
        Where the source cannot be read without dropping or guessing.
    """
    if isinstance(source, Draws):
        _refuse_unused(source, "names", names, argument)
        _refuse_unused(source, "chain", chain, argument)
        return source
    found = _collect(source, names, chain, argument)
    if not found.arrays:
        raise DrawsError(argument, "at least one parameter", "none", "Pass the draws by name.")
    for name in found.arrays:
        if not isinstance(name, str) or not name:
            raise ArgumentTypeError(
                f"{argument}: names", "non-empty texts", repr(name), "Rename the parameter."
            )
    if found.chain is None and not found.has_chain_axis:
        refuse_unsaid_chain(found.arrays, argument)
    lead = infer_chains(found.arrays, found.has_chain_axis, found.chain, argument, ordered=ordered)
    values = {k: _stack(v, lead, f"{argument}[{k!r}]") for k, v in found.arrays.items()}
    chain_names = found.chain_names or lead.chain_names
    return Draws(values, lead.starts, lead.has_chain_axis, found.dims, found.labels, chain_names)


def _collect(source: Any, names: Iterable[str] | None, chain: Any, argument: str) -> Found:
    if isinstance(source, str | bytes | os.PathLike):
        raise ArgumentTypeError(
            argument, "draws", f"{source!r}, a path or a text", "Read files with sy.read(path)."
        )
    if is_labelled(source):
        read = from_labelled
    elif isinstance(source, Mapping):
        read = _from_mapping
    elif looks_like_frame(source):
        read = from_frame
    else:
        return _from_array(source, names, chain, argument)
    _refuse_unused(source, "names", names, argument)
    return read(source, chain, argument)


def _refuse_unused(source: Any, option: str, given: Any, argument: str) -> None:
    if given is not None:
        raise ArgumentError(
            option,
            f"nothing, since {argument} is a {type(source).__name__} that tells them itself",
            repr(given) if isinstance(given, str) else type(given).__name__,
            f"Leave {option}= out.",
        )


def _from_mapping(source: Mapping[str, Any], chain: Any, argument: str) -> Found:
    entries = dict(source)
    groups = take_chain(entries, chain, argument)
    labelled = {k: v for k, v in entries.items() if is_labelled(v)}
    found = from_labelled(labelled, groups, argument) if labelled else Found({}, chain=groups)
    # The order of the caller is kept, also where only some of the arrays are labelled.
    found.arrays = {
        k: found.arrays[k] if k in labelled else plain_array(v, f"{argument}[{k!r}]")
        for k, v in entries.items()
    }
    return found


def _from_array(source: Any, names: Iterable[str] | None, chain: Any, argument: str) -> Found:
    array = plain_array(source, argument)
    if names is None:
        raise ArgumentError(
            "names",
            f"names for the columns of an array of shape {array.shape}",
            "none",
            "Pass names=[…], or the draws as a mapping from names to arrays.",
        )
    if isinstance(names, str):
        names = [names]
    if not isinstance(names, Iterable):
        raise ArgumentTypeError("names", "names for the columns", repr(names), "Pass names=[…].")
    listed = list(names)
    if array.ndim == 1 and len(listed) == 1:
        array = array[:, None]
    if array.ndim not in (2, 3) or array.shape[-1] != len(listed):
        raise ShapeError(
            argument,
            f"an array (n, {len(listed)}) or (chain, draw, {len(listed)}) for {len(listed)} names",
            str(array.shape),
            "Give one name a column, or pass a mapping from names to arrays.",
        )
    if len(set(listed)) < len(listed):
        twice = sorted({n for n in listed if listed.count(n) > 1})
        raise ArgumentError("names", "each name once", f"{twice} more than once", "Rename them.")
    arrays = {name: array[..., i] for i, name in enumerate(listed)}
    groups = take_chain({}, chain, argument)
    return Found(arrays, has_chain_axis=array.ndim == 3, chain=groups)


def _stack(array: npt.NDArray[Any], lead: Chains, argument: str) -> Array:
    count = int(lead.starts[-1])
    stacked = array.reshape(count, *array.shape[2:]) if lead.has_chain_axis else array
    out = np.require(stacked, dtype=np.float64, requirements=["C", "A"])
    if out.size == 0:
        raise DrawsError(
            argument, "at least one element a draw", f"shape {array.shape}", "Leave it out."
        )
    finite = np.isfinite(out)
    if not finite.all():
        rows = np.flatnonzero(~finite.reshape(count, -1).all(axis=1))
        raise DrawsError(
            argument,
            "finite draws",
            f"{int((~finite).sum())} values NaN or infinite in {len(rows)} draws, "
            f"first at draw {int(rows[0])}",
            "Leave out what is not a parameter, or find out why the sampler produced them.",
        )
    view = out.view()
    view.flags.writeable = False
    return view
