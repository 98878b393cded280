"""Data frames of any library, through narwhals: one column a parameter, none gathered."""

from __future__ import annotations

import sys
from typing import Any, Literal, NoReturn

import numpy.typing as npt

from steelyard.arrays import plain_array
from steelyard.base.chains import Found, take_chain
from steelyard.errors import ArgumentTypeError, DrawsError

__all__ = ["frame_columns", "from_frame", "looks_like_frame"]


def looks_like_frame(source: Any) -> bool:
    """Whether a source has columns, or streams them as Arrow does; single series are arrays."""
    # Asked of the class: of a lazy frame, to name the columns may be work.
    if hasattr(type(source), "columns"):
        return True
    return hasattr(source, "__arrow_c_stream__") and not hasattr(source, "__array__")


def from_frame(source: Any, chain: Any, argument: str) -> Found:
    """Stacked draws from the columns of a frame; `chain` may name one of them."""
    columns = frame_columns(source, chain if isinstance(chain, str) else None, argument)
    groups = take_chain(columns, chain, argument)
    arrays = {k: plain_array(v, f"{argument}[{k!r}]") for k, v in columns.items()}
    return Found(arrays, has_chain_axis=False, chain=groups)


def frame_columns(source: Any, chain: str | None, argument: str) -> dict[str, npt.NDArray[Any]]:
    """All columns of a frame as numpy arrays; missing values are refused."""
    if hasattr(type(source), "collect"):
        _refuse_kind(source, argument, None)
    _refuse_bad_names(source, argument)
    frame = _narwhals_frame(source, argument)
    _refuse_chain_in_index(frame.to_native(), chain, argument)
    out = {}
    for name in frame.columns:
        missing = int(frame[name].null_count())
        if missing:
            raise DrawsError(
                f"{argument}[{name!r}]",
                "a number in every row",
                f"{missing} missing values",
                "Remove the column, or find out why the sampler left rows empty.",
            )
        out[name] = frame[name].to_numpy()
    return out


def _refuse_bad_names(source: Any, argument: str) -> None:
    # The `columns` of pyarrow are arrays; their names stand beside them.
    names: list[Any] = list(getattr(source, "column_names", getattr(source, "columns", ())))
    for name in names:
        if not isinstance(name, str):
            raise ArgumentTypeError(
                f"{argument}: names",
                "columns whose names are texts",
                f"{name!r} of type {type(name).__name__}",
                "Rename the columns after the parameters.",
            )
    twice = sorted({name for name in names if names.count(name) > 1})
    if twice:
        raise DrawsError(
            argument, "each column name once", f"{twice} more than once", "Rename the columns."
        )


def _narwhals_frame(source: Any, argument: str) -> Any:
    import narwhals as nw

    try:
        return nw.from_native(source, eager_only=True)
    except TypeError as error:
        if hasattr(source, "__arrow_c_stream__"):
            return nw.DataFrame.from_arrow(source, backend=_backend())
        _refuse_kind(source, argument, error)


def _refuse_kind(source: Any, argument: str, error: Exception | None) -> NoReturn:
    raise ArgumentTypeError(
        argument,
        "a mapping, xarray Dataset, data frame or array",
        f"{type(source).__module__.partition('.')[0]}.{type(source).__name__}",
        "Call .collect() on a lazy frame; convert anything else to a mapping from names to arrays.",
    ) from error


def _backend() -> Literal["polars", "pandas", "pyarrow"]:
    if "polars" in sys.modules:
        return "polars"
    return "pandas" if "pandas" in sys.modules else "pyarrow"


def _refuse_chain_in_index(native: Any, chain: str | None, argument: str) -> None:
    """The index of a pandas frame is not read; a chain in it would be lost in silence."""
    levels = [str(name) for name in getattr(getattr(native, "index", None), "names", ())]
    lost = [name for name in ("chain", chain) if name in levels]
    if lost:
        raise DrawsError(
            argument,
            "the chain of each draw in a column",
            f"{lost[0]!r} in the index",
            f'Pass frame.reset_index() and chain="{lost[0]}".',
        )
