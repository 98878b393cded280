"""What a file is: its name tells, and its first bytes have to agree."""

from __future__ import annotations

import os
from pathlib import Path
from typing import Any, Literal, NoReturn

from steelyard.errors import ArgumentError, ArgumentTypeError

__all__ = ["Form", "existing_file", "form_of", "refuse_file"]

Form = Literal["npz", "npy", "csv", "parquet", "netcdf", "zarr"]

_FORMS: dict[str, Form] = {
    ".npz": "npz",
    ".npy": "npy",
    ".csv": "csv",
    ".parquet": "parquet",
    ".nc": "netcdf",
    ".nc4": "netcdf",
    ".netcdf": "netcdf",
    ".zarr": "zarr",
}
# How a file of each form begins.
_STARTS: dict[Form, tuple[bytes, ...]] = {
    "npz": (b"PK\x03\x04", b"PK\x05\x06"),
    "npy": (b"\x93NUMPY",),
    "parquet": (b"PAR1",),
    "netcdf": (b"\x89HDF\r\n\x1a\n", b"CDF\x01", b"CDF\x02", b"CDF\x05"),
}
_LOOKS = {
    b"PK\x03\x04": "a zip archive",
    b"\x93NUMPY": "a .npy array",
    b"PAR1": "a Parquet table",
    b"\x89HDF": "an HDF5 file",
    b"CDF": "a NetCDF file",
    b"\x1f\x8b": "a gzip archive",
    b"\x80": "a pickle, which could run code when read",
}
_ZARR_MARKS = ("zarr.json", ".zgroup", ".zmetadata")


def existing_file(path: Any) -> Path:
    """The path, of something that exists."""
    if not isinstance(path, str | os.PathLike):
        raise ArgumentTypeError(
            "path", "a path as text or pathlib.Path", type(path).__name__, "Pass data to Fit."
        )
    file = Path(os.fsdecode(path))
    if not file.exists():
        raise ArgumentError(
            f"path {file}",
            "a file that exists",
            "none there",
            f"Check the name; relative paths start at {Path.cwd()}.",
        )
    return file


def form_of(file: Path) -> Form:
    """The form that the name tells, held against the first bytes."""
    if file.is_dir():
        if any((file / mark).exists() for mark in _ZARR_MARKS):
            return "zarr"
        raise ArgumentError(
            f"path {file}", "a file, or a folder that is a Zarr store", "another folder", "Name it."
        )
    form = _FORMS.get(file.suffix.lower())
    if form is None or form == "zarr":
        raise ArgumentError(
            f"path {file}",
            f"a file whose name ends in one of {', '.join(_FORMS)} (.zarr being a folder)",
            f"{file.suffix or 'no ending'!r}",
            "Convert it, or load it with its own library and pass the arrays to Fit.",
        )
    _refuse_other_start(file, form)
    return form


def _refuse_other_start(file: Path, form: Form) -> None:
    try:
        with file.open("rb") as stream:
            start = stream.read(8)
    except OSError as error:
        refuse_file(file, "a file that can be read", str(error), error)
    starts = _STARTS.get(form)
    looks = next((words for mark, words in _LOOKS.items() if start.startswith(mark)), None)
    if not start:
        looks = "an empty file"
    if start.startswith(starts) if starts else looks is None:
        return
    raise ArgumentError(
        f"path {file}",
        f"a {file.suffix.lower()} file",
        looks or f"something else, which begins with {start!r}",
        "Give the file the ending of what it is, or write it again.",
    )


def refuse_file(file: Path, expected: str, came: str, error: Exception) -> NoReturn:
    """Refuse a file that cannot be read, whatever the library that tried said."""
    raise ArgumentError(
        f"path {file}", expected, came, "Write the file again, numbers only, or copy it again."
    ) from error
