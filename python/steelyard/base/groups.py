"""NetCDF files and Zarr stores through xarray: opened lazily, one group at a time."""

from __future__ import annotations

from collections.abc import Iterable, Mapping
from importlib import import_module
from importlib.util import find_spec
from pathlib import Path
from typing import Any

from steelyard.base.names import close_names
from steelyard.base.optional import xarray
from steelyard.errors import (
    AmbiguousNameError,
    DrawsError,
    MissingExtraError,
    UnknownNameError,
)

__all__ = ["only_group", "open_groups", "refuse_missing_chunks"]

_HDF5 = b"\x89HDF\r\n\x1a\n"
# NetCDF 3 comes as CDF1 and CDF2; scipy does not read CDF5.
_CLASSIC = (b"CDF\x01", b"CDF\x02")


def open_groups(path: Path, form: str) -> dict[str, Any]:
    """Datasets by group (the root is ``"/"``), nothing read but names and shapes."""
    module = xarray()
    if form == "zarr":
        _need(path, "zarr", "zarr")
        # Without looking for consolidated metadata, whose absence xarray warns of.
        opened = module.open_groups(path, engine="zarr", consolidated=False, cache=False)
    elif (engine := _netcdf_engine(path)) == "scipy":  # the classic format has no groups
        opened = {"/": module.open_dataset(path, engine=engine, cache=False)}
    else:
        # Dimensions that the file does not name get made-up names, and are refused as such.
        options = {"phony_dims": "access"} if engine == "h5netcdf" else {}
        opened = module.open_groups(path, engine=engine, cache=False, **options)
    return {name.strip("/") or "/": dataset for name, dataset in opened.items()}


def _netcdf_engine(path: Path) -> str:
    with path.open("rb") as file:
        start = file.read(8)
    if start == _HDF5:
        if find_spec("h5netcdf") and (find_spec("h5py") or find_spec("pyfive")):
            return "h5netcdf"
        return _need(path, "netCDF4, or h5netcdf and h5py,", "netCDF4").lower()
    if start[:4] in _CLASSIC and find_spec("scipy"):
        return "scipy"
    return _need(path, "netCDF4 or scipy", "netCDF4").lower()


def _need(path: Path, wanted: str, module: str) -> str:
    if find_spec(module) is None:
        raise MissingExtraError(
            str(path),
            f"{wanted} to be installed, which reads this file",
            "no such library",
            f"Install it, for instance with: pip install {module}.",
        )
    return module


def only_group(groups: Mapping[str, Any], group: str | None, path: Path) -> tuple[str, Any]:
    """The group that is asked for, or the only one that holds anything."""
    filled = [name for name, dataset in groups.items() if len(dataset.data_vars)]
    if group is not None:
        name = group.strip("/") or "/"
        if name not in groups:
            raise UnknownNameError(
                "group", f"a group of {path}", repr(group), close_names(name, filled)
            )
        return name, groups[name]
    if not filled:
        raise DrawsError(str(path), "a group with variables", "none", "Write the draws to it.")
    if len(filled) > 1:
        raise AmbiguousNameError(
            "group",
            f"the group of {path} to read",
            f"nothing, with {len(filled)} groups there: {', '.join(filled)}",
            f"Pass for instance group={filled[0]!r}.",
        )
    return filled[0], groups[filled[0]]


def refuse_missing_chunks(path: Path, group: str, names: Iterable[str]) -> None:
    """
    Refuse a Zarr group of which chunks of real numbers are not stored.

    A chunk that is not there reads as its fill value, often 0: a store that was copied in part
    would give draws nobody made, in silence. Integers are let pass, since Zarr leaves chunks out
    that hold the fill value only, and an indicator may well be 0 throughout a chunk.
    """
    node = import_module("zarr").open_group(str(path), mode="r", path=group.strip("/"))
    for name in names:
        stored = node[name]
        if stored.dtype.kind == "f" and stored.nchunks_initialized < stored.nchunks:
            raise DrawsError(
                f"{path}, {name!r}",
                f"{stored.nchunks} chunks stored",
                f"{stored.nchunks_initialized}",
                "Copy the store again; if empty chunks were left out on purpose, write it with "
                "write_empty_chunks on.",
            )
