"""
What is counted, and the bounds that it is held against.

- A *cell* is one quantity of one problem over all data sets. An *estimate* is one of its data sets.
- *Coverage* is counted over the estimates called sound: their interval holds the truth.
- A family is *of finite variance* if that of its weights under the base is, which is known by
  algebra and stated with each problem; the problems of a family that are not are counted apart.
- An interval *really holds* in a cell if the 95 % intervals of all its estimates, whatever their
  verdict, hold the truth in at least 93 % of the data sets, and the root mean square of estimate
  minus truth is below a tenth of the quantity's sd (`Exact.scale`). The share called sound is
  counted over all estimates of such cells together.
- *Reported over actual error* of a cell is the median of the reported errors of its sound
  estimates, over the root mean square of all its estimates minus truth; only cells with at least
  half their estimates called sound count, since the actual error of a selection is not an error.
- *False sound*: the share of estimates that are called sound although the 95 % interval misses.
- *False refit*: the share called refit in the cells whose interval really holds.
- Errors of shares are those of sums over data sets of a problem, since the quantities of one data
  set stand and fall together.
"""

from __future__ import annotations

from collections.abc import Callable, Sequence
from dataclasses import dataclass

import numpy as np

from .measure import Cell

HOLDS = 0.93
SMALL = 0.1
OVERALL, FINITE, OTHER = 0.94, 0.92, 0.88
KEPT, INFLATED, WASTEFUL = 0.80, 1.8, 0.985

# Fewer sound estimates than this say too little about a family's coverage to be held to a bound.
FEWEST = 100

# What an infinite reported error counts as, so that ratios have a spread.
_LARGEST_RATIO = 100.0


@dataclass(frozen=True)
class Share:
    """A share with its own binomial error, counted over whole data sets."""

    share: float
    error: float
    count: int

    def __str__(self) -> str:
        return f"{100 * self.share:5.1f} ± {100 * self.error:3.1f}" if self.count else "    –     "


def share_of(
    cells: Sequence[Cell],
    hit: Callable[[Cell], np.ndarray],
    among: Callable[[Cell], np.ndarray],
) -> Share:
    """Share of `hit` among the estimates in `among`."""
    sums: dict[str, list[np.ndarray]] = {}
    for cell in cells:
        chosen = among(cell)
        pair = sums.setdefault(cell.problem, [np.zeros(len(chosen)), np.zeros(len(chosen))])
        pair[0] += hit(cell) & chosen
        pair[1] += chosen
    hits = np.concatenate([pair[0] for pair in sums.values()]) if sums else np.zeros(0)
    counts = np.concatenate([pair[1] for pair in sums.values()]) if sums else np.zeros(0)
    total = counts.sum()
    if total == 0:
        return Share(np.nan, np.nan, 0)
    share = hits.sum() / total
    spread = float(((hits - share * counts) ** 2).sum())
    # No miss at all is not an error of zero: at least that of one miss.
    return Share(float(share), max(np.sqrt(spread), 1.0) / total, int(total))


def really_holds(cell: Cell) -> bool:
    """Whether a cell's 95 % interval holds, and its error is small; see the module."""
    actual = actual_error(cell)
    return bool(cell.covered[1].mean() >= HOLDS and actual < SMALL * cell.scale)


def actual_error(cell: Cell) -> float:
    """Root mean square of estimate minus truth; +inf where an estimate is missing."""
    with np.errstate(over="ignore"):
        return float(np.sqrt(np.mean(np.where(np.isnan(cell.miss), np.inf, cell.miss) ** 2)))


def ratio_of_errors(cells: Sequence[Cell]) -> np.ndarray:
    """Reported over actual error of the cells of which at least half is called sound."""
    ratios = []
    for cell in cells:
        actual = actual_error(cell)
        if cell.sound.mean() >= 0.5 and 0 < actual < np.inf:
            reported = float(np.median(cell.error[cell.sound]))
            ratios.append(min(reported / actual, _LARGEST_RATIO))
    return np.array(ratios)


def coverage(cells: Sequence[Cell], level: int = 1) -> Share:
    """Coverage of the intervals of one of the levels among sound estimates."""
    return share_of(cells, lambda c: c.covered[level], lambda c: c.sound)


def kept(cells: Sequence[Cell]) -> Share:
    """Share called sound in the cells whose interval really holds."""
    return share_of(
        [c for c in cells if really_holds(c)], lambda c: c.sound, lambda c: np.ones_like(c.sound)
    )


def by_group(cells: Sequence[Cell]) -> dict[str, list[Cell]]:
    """Cells by family, those of infinite variance apart."""
    groups: dict[str, list[Cell]] = {}
    for cell in cells:
        groups.setdefault(cell.group, []).append(cell)
    return groups


@dataclass(frozen=True)
class Bound:
    """A figure held against a limit."""

    name: str
    figure: float
    error: float
    limit: float
    at_least: bool

    def met(self, allowance: float = 0.0) -> bool:
        """Whether it holds, with `allowance` times the figure's own error in its favour."""
        sign = 1 if self.at_least else -1
        return bool(sign * self.figure + allowance * self.error >= sign * self.limit)


def bounds(cells: Sequence[Cell]) -> list[Bound]:
    """All bounds with their figures."""
    overall, share = coverage(cells), kept(cells)
    found = [
        Bound("coverage overall", overall.share, overall.error, OVERALL, True),
        Bound("coverage overall, at most", overall.share, overall.error, WASTEFUL, False),
        Bound("called sound where it holds", share.share, share.error, KEPT, True),
    ]
    ratios = ratio_of_errors(cells)
    if len(ratios):
        spread = 1.25 * float(np.std(ratios)) / np.sqrt(len(ratios))
        found.append(
            Bound("reported over actual error", float(np.median(ratios)), spread, INFLATED, False)
        )
    for group, members in by_group(cells).items():
        limit = FINITE if members[0].finite else OTHER
        part = coverage(members)
        if part.count >= FEWEST:
            found.append(Bound(f"coverage: {group}", part.share, part.error, limit, True))
    return found
