"""Draws and log likelihoods from files."""

from __future__ import annotations

import os
from collections.abc import Callable
from pathlib import Path
from typing import Any, Literal, overload

import numpy as np
import numpy.typing as npt

from steelyard.arrays import plain_array
from steelyard.base.chains import refuse_unsaid_chain, take_chain
from steelyard.base.draws import Draws
from steelyard.base.forms import Form, existing_file, form_of, refuse_file
from steelyard.base.frames import frame_columns
from steelyard.base.groups import only_group, open_groups, refuse_missing_chunks
from steelyard.base.labelled import leading_dims
from steelyard.base.reading import read_draws
from steelyard.base.tables import read_csv, read_parquet
from steelyard.errors import ArgumentError, DrawsError, SteelyardError

__all__ = ["read"]

Kind = Literal["draws", "loglik"]


@overload
def read(
    path: str | os.PathLike[str],
    group: str | None = None,
    *,
    chain: Any = None,
    kind: Literal["draws"],
) -> Draws: ...


@overload
def read(
    path: str | os.PathLike[str],
    group: str | None = None,
    *,
    chain: Any = None,
    kind: Literal["loglik"] | None = None,
) -> Any: ...


def read(
    path: str | os.PathLike[str],
    group: str | None = None,
    *,
    chain: Any = None,
    kind: Kind | None = None,
) -> Any:
    """
    Read draws, or a log likelihood, from a file.

    Parameters
    ----------
    path : str or path
        A ``.npz``, ``.npy``, ``.csv``, ``.parquet`` or NetCDF (``.nc``, ``.nc4``, ``.netcdf``)
        file, or a Zarr store (a folder).
    group : str, optional
        The group of a NetCDF file or Zarr store; needed where several hold variables.
    chain : str or array_like, optional
        For stacked draws the column of a table, the entry of a ``.npz`` or the coordinate along
        the draws that holds the chain of each draw; or an array ``(n,)``. Chains are contiguous.
    kind : {"draws", "loglik"}, optional
        What is read. Left out, a ``.npy`` file, and a group whose name has the word "likelihood"
        or "loglik" in it, is a log likelihood; everything else is draws.

    Returns
    -------
    Draws, or the likelihood
        Draws are in memory, float64. A log likelihood is what ``Fit(loglik=…)`` takes: a
        memory-mapped array of a ``.npy`` file, a mapping from terms to arrays, and to lazily read
        DataArrays of a NetCDF file or Zarr store.

    Raises
    ------
    ArgumentError
        Where there is no such file, or where it is of another kind, cut short, damaged, or holds
        pickled objects, which are never loaded.
    DrawsError, ShapeError, ArgumentTypeError
        Where what it holds cannot be read as draws without dropping or guessing.
    UnknownNameError, AmbiguousNameError
        For a group that is not there; for several of which none is named; for an entry called
        "chain" where `chain` does not say what it is.
    MissingExtraError
        Where the library that reads such files is not installed.

    Notes
    -----
    Tables: the first line of a ``.csv`` holds the names, lines that start with ``#`` are comments,
    decimals have a point. A column is a parameter, whatever brackets its name has; in a log
    likelihood it is a term without observation axes (stack the columns to have them as
    observations of one term). A table that was cut short between two rows, or within the last
    number, looks like a whole one.

    Larger than memory: ``.npy``, NetCDF and Zarr are read by block. The values of a log likelihood
    are checked when they are used.

    Examples
    --------
    >>> import pathlib, tempfile
    >>> import steelyard as sy
    >>> with tempfile.TemporaryDirectory() as folder:
    ...     path = pathlib.Path(folder) / "quay.csv"
    ...     _ = path.write_text("chain,rate\\n0,0.10\\n0,0.12\\n1,0.11\\n1,0.09\\n")
    ...     sy.read(path, chain="chain")
    <Draws: 4 in 2 chains: rate>
    """
    file = existing_file(path)
    form = form_of(file)
    if group is not None and (not isinstance(group, str) or form not in ("netcdf", "zarr")):
        raise ArgumentError(
            "group",
            "the name of a group of a NetCDF file or Zarr store",
            f"{group!r} for {file}",
            "Leave group= out: other files have no groups.",
        )
    _check_kind(kind, form)
    if form in ("netcdf", "zarr"):
        return _guarded(file, lambda: _read_groups(file, form, group, kind, chain))
    return _guarded(file, lambda: _read_arrays(file, form, kind, chain))


def _check_kind(kind: Any, form: Form) -> None:
    if kind is not None and (not isinstance(kind, str) or kind not in ("draws", "loglik")):
        raise ArgumentError("kind", '"draws" or "loglik"', repr(kind), "Say what the file holds.")
    if form == "npy" and kind == "draws":
        raise ArgumentError(
            "kind",
            '"loglik" for a .npy file, whose array has no names',
            repr(kind),
            "Read it with numpy.load, and pass it to Fit with names=[…].",
        )


def _says_likelihood(group: str) -> bool:
    letters = "".join(c for c in group.lower() if c.isalpha())
    return "likelihood" in letters or "loglik" in letters


def _guarded(file: Path, load: Callable[[], Any]) -> Any:
    """Errors of other libraries are told as ours: each says "damaged" in its own class."""
    try:
        return load()
    except (SteelyardError, MemoryError):
        raise
    except Exception as error:
        if "allow_pickle" in str(error) or "Python objects" in str(error):
            refuse_file(file, "arrays of numbers", "pickled objects, which are never loaded", error)
        refuse_file(file, "a whole file", f"one that is cut short or damaged ({error})", error)


def _read_arrays(file: Path, form: Form, kind: Kind | None, chain: Any) -> Any:
    if form == "npy":
        return _memory_mapped(file)
    if form == "parquet":
        source = read_parquet(file)
    elif form == "csv":
        source = read_csv(file, chain if isinstance(chain, str) else None)
    else:
        source = _zipped(file)
    if kind != "loglik":
        return read_draws(source, chain=chain, argument=str(file))
    if form == "parquet":
        source = frame_columns(source, chain if isinstance(chain, str) else None, str(file))
    take_chain(source, chain, str(file))
    terms = {k: plain_array(v, f"{file}[{k!r}]") for k, v in source.items()}
    if chain is None:
        refuse_unsaid_chain(terms, str(file))
    return terms


def _zipped(file: Path) -> dict[str, npt.NDArray[Any]]:
    # Opened here, since numpy leaves a broken archive open.
    with file.open("rb") as stream, np.load(stream, allow_pickle=False) as archive:
        names = list(archive.files)
        if len(set(names)) < len(names):
            twice = sorted({name for name in names if names.count(name) > 1})
            raise DrawsError(
                str(file), "each name once", f"{twice} more than once", "Write the file again."
            )
        return {name: archive[name] for name in names}


def _memory_mapped(file: Path) -> npt.NDArray[Any]:
    array: npt.NDArray[Any] = np.load(file, mmap_mode="r", allow_pickle=False)
    plain_array(array, str(file))
    return array


def _read_groups(file: Path, form: Form, group: str | None, kind: Kind | None, chain: Any) -> Any:
    groups = open_groups(file, form)
    stays_open = False
    try:
        name, dataset = only_group(groups, group, file)
        where = str(file) if name == "/" else f"{file}, group {name!r}"
        if form == "zarr":
            refuse_missing_chunks(file, name, [str(k) for k in dataset.data_vars])
        if kind == "draws" or (kind is None and not _says_likelihood(name)):
            return read_draws(dataset, chain=chain, argument=where)
        terms = {str(k): v for k, v in dataset.data_vars.items()}
        leading_dims(terms, where)
        stays_open = True
        return terms
    finally:
        if not stays_open:
            for dataset in groups.values():
                dataset.close()
