"""Tables in files: ``.csv`` by the standard library, ``.parquet`` by the library that is there."""

from __future__ import annotations

import csv
import sys
from array import array
from collections.abc import Iterator
from importlib import import_module
from importlib.util import find_spec
from pathlib import Path
from typing import Any, TextIO

import numpy as np
import numpy.typing as npt

from steelyard.base.names import close_names
from steelyard.errors import DrawsError, MissingExtraError

__all__ = ["read_csv", "read_parquet"]


def read_csv(path: Path, chain: str | None) -> dict[str, npt.NDArray[Any]]:
    """
    Columns of a comma-separated table, ``(n,)`` float64; `chain` names one that may hold texts.

    The first line that is not a comment holds the names. Lines that start with ``#`` are comments.
    """
    with path.open(newline="", encoding="utf-8-sig") as file:
        lines = _Lines(file)
        rows = csv.reader(lines, strict=True, skipinitialspace=True)
        try:
            names = _header(rows, path)
            groups = _chain_column(names, chain, path)
            numbers, chains = _cells(rows, lines, names, groups, path)
        except (csv.Error, UnicodeDecodeError) as error:
            raise DrawsError(
                f"{path}, line {lines.number}",
                "text in UTF-8, cells separated by commas",
                str(error),
                "Write the table as plain comma-separated text.",
            ) from error
    others = [name for i, name in enumerate(names) if i != groups]
    if not numbers:
        raise DrawsError(str(path), "a row for every draw", "a header only", "Write the draws too.")
    table = np.frombuffer(numbers, dtype=np.float64).reshape(-1, len(others))
    columns: dict[str, npt.NDArray[Any]] = {name: table[:, i] for i, name in enumerate(others)}
    if groups is not None:
        columns[names[groups]] = _chain_values(chains)
    return columns


class _Lines(Iterator[str]):
    """Lines without comments; knows the number and the text of the last one."""

    def __init__(self, file: TextIO) -> None:
        self._file = file
        self.number = 0
        self.text = ""

    def __next__(self) -> str:
        while True:
            self.number += 1
            self.text = next(self._file)
            if not self.text.startswith("#"):
                return self.text


def _header(rows: Iterator[list[str]], path: Path) -> list[str]:
    names = [cell.strip() for cell in next(rows, [])]
    if not names:
        raise DrawsError(str(path), "a first line with names", "no line", "Write the draws to it.")
    if all(_is_number(name) for name in names):
        raise DrawsError(
            str(path),
            "the names of the columns in the first line that is not a comment",
            f"numbers: {', '.join(names[:4])}",
            "Add a line of names, without # in front.",
        )
    for position, name in enumerate(names, start=1):
        if not name:
            raise DrawsError(
                str(path),
                "a name for every column",
                f"none for column {position} of {len(names)}",
                "If it is the index of a data frame, write the table without it.",
            )
    twice = sorted({name for name in names if names.count(name) > 1})
    if twice:
        raise DrawsError(
            str(path), "each column name once", f"{twice} more than once", "Rename the columns."
        )
    return names


def _chain_column(names: list[str], chain: str | None, path: Path) -> int | None:
    if chain is None:
        return None
    if chain not in names:
        raise DrawsError("chain", f"a column of {path}", repr(chain), close_names(chain, names))
    if len(names) == 1:
        raise DrawsError(
            str(path), "a column besides the chain", "none", "Write the draws to it too."
        )
    return names.index(chain)


def _cells(
    rows: Iterator[list[str]], lines: _Lines, names: list[str], groups: int | None, path: Path
) -> tuple[array[float], list[str]]:
    numbers, chains = array("d"), []
    empty = 0
    for row in rows:
        if not row:
            empty = empty or lines.number
            continue
        if empty or len(row) != len(names):
            _refuse_row(row, names, empty, lines, path)
        if groups is not None:
            chains.append(_chain_cell(row.pop(groups), names[groups], lines, path))
        try:
            # float() takes 1_000 for a thousand, which no table means.
            if "_" in lines.text:
                raise ValueError
            numbers.extend(map(float, row))
        except ValueError:
            others = [name for i, name in enumerate(names) if i != groups]
            _refuse_cell(row, others, lines, path)
    return numbers, chains


def _refuse_row(row: list[str], names: list[str], empty: int, lines: _Lines, path: Path) -> None:
    if empty:
        raise DrawsError(
            f"{path}, line {empty}", "a draw in every line", "an empty line", "Remove the line."
        )
    raise DrawsError(
        f"{path}, line {lines.number}",
        f"{len(names)} cells separated by commas, as in the header",
        f"{len(row)}",
        "If this is the last line, the file is cut short: write it again. Decimals need a point.",
    )


def _refuse_cell(row: list[str], names: list[str], lines: _Lines, path: Path) -> None:
    for name, cell in zip(names, row, strict=True):
        if not _is_number(cell):
            raise DrawsError(
                f"{path}, line {lines.number}, column {name!r}",
                "a number",
                repr(cell) if cell.strip() else "an empty cell",
                "Remove the column if it holds no draws, or find out why the value is missing.",
            )


def _is_number(cell: str) -> bool:
    try:
        float(cell)
    except ValueError:
        return False
    return "_" not in cell


def _chain_cell(cell: str, name: str, lines: _Lines, path: Path) -> str:
    if not cell.strip():
        raise DrawsError(
            f"{path}, line {lines.number}, column {name!r}",
            "the chain of the draw",
            "an empty cell",
            "Say which chain the draw belongs to.",
        )
    return cell.strip()


def _chain_values(cells: list[str]) -> npt.NDArray[Any]:
    """Integers where all are, else the texts."""
    try:
        return np.array([int(cell) for cell in cells], dtype=np.int64)
    except (ValueError, OverflowError):
        return np.array(cells)


def read_parquet(path: Path) -> Any:
    """A data frame of the library that is there: polars or pyarrow (which pandas uses too)."""
    for library in sorted(("polars", "pyarrow"), key=lambda name: name not in sys.modules):
        if find_spec(library) is None:
            continue
        if library == "polars":
            return import_module("polars").read_parquet(path)
        return import_module("pyarrow.parquet").read_table(path)
    raise MissingExtraError(
        str(path),
        "polars or pyarrow to be installed, one of which reads .parquet",
        "neither",
        "Install one of them, for instance with: pip install pyarrow.",
    )
