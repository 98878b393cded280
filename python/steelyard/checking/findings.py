"""What a check of the base found, found nothing of, or could not test."""

from __future__ import annotations

import math
from collections.abc import Iterator, Sequence
from dataclasses import dataclass
from html import escape
from typing import Literal, overload

from steelyard.arrays import Frozen
from steelyard.table import Table

__all__ = ["Finding", "Findings"]

Status = Literal["found", "nothing found", "not testable"]


@dataclass(frozen=True)
class Finding:
    """
    One check and what came of it.

    Attributes
    ----------
    check : str
        What was looked at.
    status : {"found", "nothing found", "not testable"}
        ``"nothing found"`` is said only where something was tested.
    figure : float
        The figure that decided, NaN without one.
    limit : float
        What it was held against.
    sentence : str
        The finding in words.
    next_step : str
        What to do about it; empty where there is nothing to do.
    """

    check: str
    status: Status
    figure: float
    limit: float
    sentence: str
    next_step: str = ""

    def __str__(self) -> str:
        tail = f" {self.next_step}" if self.next_step else ""
        return f"{self.check}: {self.status}. {self.sentence}{tail}"


@dataclass(frozen=True, eq=False)
class Findings(Frozen, Sequence[Finding]):
    """
    All findings about a base, in the order of the checks.

    Attributes
    ----------
    findings : tuple of Finding
        One for each check.
    found : tuple of Finding
        Those that say that something is wrong.

    Examples
    --------
    >>> import numpy as np, steelyard as sy
    >>> x = np.random.default_rng(1).normal(size=(4, 500))
    >>> [finding.check for finding in sy.Fit({"x": x}).check()][:2]
    ['rows aligned', 'stored density']
    """

    findings: tuple[Finding, ...]

    @overload
    def __getitem__(self, index: int) -> Finding: ...
    @overload
    def __getitem__(self, index: slice) -> Sequence[Finding]: ...
    def __getitem__(self, index: int | slice) -> Finding | Sequence[Finding]:
        return self.findings[index]

    def __len__(self) -> int:
        return len(self.findings)

    def __iter__(self) -> Iterator[Finding]:
        return iter(self.findings)

    @property
    def found(self) -> tuple[Finding, ...]:
        """The findings that say that something is wrong."""
        return tuple(f for f in self.findings if f.status == "found")

    def table(self) -> Table:
        """
        The findings as a table.

        Returns
        -------
        Table
            Columns ``check``, ``status``, ``figure``, ``limit``, ``sentence``.
        """
        names = ("check", "status", "figure", "limit", "sentence")
        return Table({n: [getattr(f, n) for f in self.findings] for n in names})

    def __str__(self) -> str:
        return "\n".join(map(str, self.findings))

    def __repr__(self) -> str:
        counts = [
            f"{sum(f.status == s for f in self.findings)} {s}"
            for s in ("found", "nothing found", "not testable")
        ]
        return f"<Findings: {', '.join(counts)}>\n{self}"

    def _repr_html_(self) -> str:
        items = "".join(f"<li>{escape(str(f))}</li>" for f in self.findings)
        return f"<ul>{items}</ul>"


def not_testable(check: str, why: str, next_step: str = "") -> Finding:
    """A check for which something is missing."""
    return Finding(check, "not testable", math.nan, math.nan, why, next_step)
