"""Tables: columns of plain values that print themselves and become frames on request."""

from __future__ import annotations

import csv
import io
import sys
from collections.abc import Iterator, Mapping, Sequence
from dataclasses import dataclass, field
from html import escape
from importlib.util import find_spec
from pathlib import Path
from typing import Any, Literal

from steelyard.arrays import ReadOnly
from steelyard.digits import chance, rounded, short
from steelyard.errors import ArgumentError, MissingExtraError, ShapeError, UnknownNameError

__all__ = ["Table"]

Backend = Literal["polars", "pandas", "pyarrow"]
_BACKENDS: tuple[Backend, ...] = ("polars", "pandas", "pyarrow")


@dataclass(frozen=True, eq=False)
class Table:
    """
    Columns of equal length.

    Parameters
    ----------
    columns : mapping of str to sequence
        The columns in order; None is a cell that says nothing.
    errors : mapping of str to sequence of float
        For a column of numbers, their Monte Carlo errors: numbers print only the digits which
        the error supports. Full precision stays in the columns.
    title : str
        Printed above the table.
    chances : sequence of str
        Columns of probabilities of being right, which never print as a certainty.

    Examples
    --------
    >>> from steelyard.table import Table
    >>> print(Table({"quantity": ["mu"], "mean": [0.12345]}, {"mean": [0.003]}))
    quantity   mean
    mu        0.123
    """

    columns: Mapping[str, Sequence[Any]]
    errors: Mapping[str, Sequence[float]] = field(default_factory=dict)
    title: str = ""
    chances: Sequence[str] = ()

    def __post_init__(self) -> None:
        columns = ReadOnly({name: tuple(column) for name, column in self.columns.items()})
        lengths = {name: len(column) for name, column in columns.items()}
        if len(set(lengths.values())) > 1:
            raise ShapeError("columns", "columns of equal length", str(lengths), "Fill them up.")
        object.__setattr__(self, "columns", columns)

    def __len__(self) -> int:
        return len(next(iter(self.columns.values()), ()))

    def __iter__(self) -> Iterator[dict[str, Any]]:
        for row in range(len(self)):
            yield {name: column[row] for name, column in self.columns.items()}

    def __getitem__(self, column: str) -> Sequence[Any]:
        if column not in self.columns:
            raise UnknownNameError(
                "column", f"one of {', '.join(self.columns)}", repr(column), "Name a column."
            )
        return self.columns[column]

    def to_frame(self, backend: Backend | None = None) -> Any:
        """
        The table as a data frame.

        Parameters
        ----------
        backend : {"polars", "pandas", "pyarrow"}, optional
            The library; by default the first one already imported, else the first one installed.

        Returns
        -------
        frame
            A native frame of that library.

        Raises
        ------
        ArgumentError
            For another backend.
        MissingExtraError
            Where none of the libraries is installed.
        """
        import narwhals as nw

        if backend is not None and backend not in _BACKENDS:
            raise ArgumentError(
                "backend", f"one of {', '.join(_BACKENDS)}", repr(backend), "Name one of those."
            )
        chosen = backend or _present_backend()
        if chosen is None or (backend is not None and find_spec(backend) is None):
            raise MissingExtraError(
                "backend",
                "an installed frame library",
                f"none of {', '.join(_BACKENDS)}" if backend is None else f"no {backend}",
                "Install one of them, or use to_csv().",
            )
        frame = nw.from_dict({k: list(v) for k, v in self.columns.items()}, backend=chosen)
        return frame.to_native()

    def to_csv(self, path: str | Path | None = None) -> str:
        """
        The table as comma-separated text in full precision.

        Parameters
        ----------
        path : str or Path, optional
            Where to write it as well.

        Returns
        -------
        str
            The text.
        """
        buffer = io.StringIO()
        writer = csv.writer(buffer, lineterminator="\n")
        writer.writerow(self.columns)
        writer.writerows(zip(*self.columns.values(), strict=True))
        if path is not None:
            Path(path).write_text(buffer.getvalue(), encoding="utf-8")
        return buffer.getvalue()

    def _printed(self) -> tuple[list[list[str]], list[bool]]:
        cells = []
        numeric = []
        for name, column in self.columns.items():
            error = self.errors.get(name)
            told = [v for v in column if v is not None]
            is_number = all(isinstance(v, int | float) for v in told) and len(told) > 0
            numeric.append(is_number)
            if is_number and error is not None:
                pairs = zip(column, error, strict=True)
                cells.append(["" if v is None else rounded(v, e) for v, e in pairs])
            elif is_number:
                text = chance if name in self.chances else short
                cells.append(["" if v is None else text(v) for v in column])
            else:
                cells.append([str(v) for v in column])
        return cells, numeric

    def __str__(self) -> str:
        cells, numeric = self._printed()
        lines = [self.title] if self.title else []
        widths = [
            max([len(name), *map(len, column)])
            for name, column in zip(self.columns, cells, strict=True)
        ]
        for row in [list(self.columns), *map(list, zip(*cells, strict=True))]:
            parts = [
                text.rjust(width) if right else text.ljust(width)
                for text, width, right in zip(row, widths, numeric, strict=True)
            ]
            lines.append("  ".join(parts).rstrip())
        return "\n".join(lines)

    def __repr__(self) -> str:
        return str(self)

    def _repr_html_(self) -> str:
        cells, numeric = self._printed()
        side = ["right" if right else "left" for right in numeric]
        head = "".join(
            f'<th style="text-align:{s}">{escape(n)}</th>'
            for n, s in zip(self.columns, side, strict=True)
        )
        body = "".join(
            "<tr>"
            + "".join(
                f'<td style="text-align:{s}">{escape(t)}</td>'
                for t, s in zip(row, side, strict=True)
            )
            + "</tr>"
            for row in zip(*cells, strict=True)
        )
        caption = f"<caption>{escape(self.title)}</caption>" if self.title else ""
        return f"<table>{caption}<thead><tr>{head}</tr></thead><tbody>{body}</tbody></table>"


def _present_backend() -> Backend | None:
    loaded = [name for name in _BACKENDS if name in sys.modules]
    installed = [name for name in _BACKENDS if find_spec(name) is not None]
    return next(iter(loaded + installed), None)
