"""The one door for draws: whatever holds them becomes :class:`Draws`, nothing dropped."""

from __future__ import annotations

import sys
from collections.abc import Iterable, Mapping
from dataclasses import dataclass, field
from typing import Any, Literal

import numpy as np
import numpy.typing as npt

from steelyard.base.chains import Chains, infer_chains
from steelyard.base.draws import Array, Draws
from steelyard.errors import ArgumentError, ArgumentTypeError, DrawsError, ShapeError

__all__ = ["float_array", "read_draws"]


@dataclass
class _Found:
    """What one kind of input yields: arrays with their leading axes still on."""

    arrays: dict[str, npt.NDArray[Any]]
    dims: dict[str, tuple[str, ...]] = field(default_factory=dict)
    labels: dict[str, npt.NDArray[Any]] = field(default_factory=dict)
    # Whether the leading axes are (chain, draw): told by names, else to be inferred.
    has_chain_axis: bool | None = None
    chain: npt.NDArray[Any] | None = None


def read_draws(
    source: Any, names: Iterable[str] | None = None, chain: Any = None, argument: str = "draws"
) -> Draws:
    """
    Read draws from a mapping, an xarray Dataset, a data frame, an array or other draws.

    Parameters
    ----------
    source : mapping, xarray.Dataset, data frame, array_like, Draws
        ``(chain, draw, *shape)`` or ``(n, *shape)`` arrays; or one ``(n, d)`` or
        ``(chain, draw, d)`` array with `names`.
    names : iterable of str, optional
        Names of the last axis of an array.
    chain : array_like or str, optional
        The chain of each stacked draw, shape ``(n,)``, chains contiguous; a column of a frame.
    argument : str
        What an error calls the source.

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
        return source
    found = _collect(source, names, chain, argument)
    if not found.arrays:
        raise DrawsError(argument, "at least one parameter", "none", "Pass the draws by name.")
    for name in found.arrays:
        if not isinstance(name, str) or not name:
            raise ArgumentTypeError(
                f"{argument}: names", "non-empty texts", repr(name), "Rename the parameter."
            )
    lead = infer_chains(found.arrays, found.has_chain_axis, found.chain, argument)
    values = {k: _stack(v, lead, f"{argument}[{k!r}]") for k, v in found.arrays.items()}
    return Draws(
        values, lead.starts, lead.has_chain_axis, found.dims, found.labels, lead.chain_names
    )


def _collect(source: Any, names: Iterable[str] | None, chain: Any, argument: str) -> _Found:
    if hasattr(source, "dims") and hasattr(source, "coords"):
        return _from_xarray(source, chain, argument)
    if isinstance(source, Mapping):
        arrays = {k: _plain(v, f"{argument}[{k!r}]") for k, v in source.items()}
        return _Found(arrays, chain=_chain_array(chain))
    if hasattr(source, "columns") or hasattr(source, "__arrow_c_stream__"):
        return _from_frame(source, chain, argument)
    return _from_array(source, names, chain, argument)


def _chain_array(chain: Any) -> npt.NDArray[Any] | None:
    if chain is None:
        return None
    if isinstance(chain, str):
        raise ArgumentError(
            "chain",
            "the chain of each draw, an array of shape (n,)",
            f"{chain!r}, the name of a column",
            "A column's name is understood only where the draws are a data frame.",
        )
    return np.asarray(chain)


def _from_array(source: Any, names: Iterable[str] | None, chain: Any, argument: str) -> _Found:
    array = _plain(source, argument)
    if names is None:
        raise ArgumentError(
            "names",
            f"names for the columns of an array of shape {array.shape}",
            "none",
            "Pass names=[…], or the draws as a mapping from names to arrays.",
        )
    if isinstance(names, str):
        names = [names]
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
    return _Found(arrays, has_chain_axis=array.ndim == 3, chain=_chain_array(chain))


def _from_xarray(source: Any, chain: Any, argument: str) -> _Found:
    if hasattr(source, "data_vars"):
        variables = {str(k): v for k, v in source.data_vars.items()}
    else:
        variables = {str(source.name or "value"): source}
    known = {str(d) for v in variables.values() for d in v.dims}
    draw = next((d for d in ("draw", "sample") if d in known), None)
    if draw is None:
        raise DrawsError(
            argument,
            "a dimension 'draw' (and 'chain'), or 'sample'",
            f"dimensions {sorted(known)}",
            "Rename the dimensions; of a tree of groups pass the posterior group.",
        )
    lead = ("chain", draw) if "chain" in known else (draw,)
    found = _Found({}, has_chain_axis=len(lead) == 2, chain=_chain_array(chain))
    for name, variable in variables.items():
        missing = [d for d in lead if d not in variable.dims]
        if missing:
            raise DrawsError(
                f"{argument}[{name!r}]",
                f"dimensions {lead} in every variable",
                f"{tuple(map(str, variable.dims))}",
                "Leave out variables that are not draws.",
            )
        ordered = variable.transpose(*lead, ...)
        found.arrays[name] = _plain(ordered.values, f"{argument}[{name!r}]")
        found.dims[name] = tuple(str(d) for d in ordered.dims[len(lead) :])
        for dim in found.dims[name]:
            if dim in variable.coords:
                found.labels[dim] = np.asarray(variable.coords[dim].values)
    return found


def _from_frame(source: Any, chain: Any, argument: str) -> _Found:
    import narwhals as nw

    try:
        if hasattr(source, "columns"):
            frame = nw.from_native(source, eager_only=True)
        else:
            frame = nw.DataFrame.from_arrow(source, backend=_frame_backend())
    except TypeError as error:
        raise ArgumentTypeError(
            argument,
            "a mapping, xarray Dataset, data frame or array",
            type(source).__name__,
            "Convert it to a mapping from names to arrays.",
        ) from error
    columns = [str(c) for c in frame.columns]
    groups = None
    if isinstance(chain, str):
        if chain not in columns:
            raise DrawsError(
                "chain", f"a column of the frame, one of {columns}", repr(chain), "Name it."
            )
        groups = frame[chain].to_numpy()
        columns.remove(chain)
    elif chain is not None:
        groups = _chain_array(chain)
    arrays = {}
    for name in columns:
        missing = int(frame[name].null_count())
        if missing:
            raise DrawsError(
                f"{argument}[{name!r}]",
                "a number in every row",
                f"{missing} missing values",
                "Remove the column, or find out why the sampler left rows empty.",
            )
        arrays[name] = _plain(frame[name].to_numpy(), f"{argument}[{name!r}]")
    return _Found(arrays, has_chain_axis=False, chain=groups)


def _frame_backend() -> Literal["polars", "pandas", "pyarrow"]:
    if "polars" in sys.modules:
        return "polars"
    return "pandas" if "pandas" in sys.modules else "pyarrow"


def _plain(source: Any, argument: str) -> npt.NDArray[Any]:
    """A numpy array of numbers, not yet converted; anything else is refused by name."""
    if not isinstance(source, np.ndarray) and hasattr(source, "__dlpack__"):
        try:
            source = np.from_dlpack(source)
        except (BufferError, RuntimeError, TypeError) as error:
            raise ArgumentTypeError(
                argument, "an array in the memory of the CPU", str(error), "Copy it there first."
            ) from error
    try:
        array = np.asarray(source)
    except ValueError as error:
        raise ShapeError(
            argument,
            "an array of equal rows",
            f"ragged rows ({error})",
            "For chains of unequal length stack the draws and pass chain= with the chain of each.",
        ) from error
    if array.dtype.kind not in "fiub":
        raise ArgumentTypeError(
            argument,
            "real numbers",
            f"dtype {array.dtype}",
            "Convert to float64; complex, text and object arrays are refused.",
        )
    return array


def float_array(array: npt.NDArray[Any]) -> Array:
    """Aligned native float64; a copy only where that is needed."""
    return np.require(array, dtype=np.float64, requirements=["A"])


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
