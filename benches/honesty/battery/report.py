"""The table and the reliability picture."""

from __future__ import annotations

from collections.abc import Iterator, Sequence
from pathlib import Path
from typing import Any

import numpy as np

from .bounds import (
    Bound,
    actual_error,
    by_group,
    coverage,
    kept,
    ratio_of_errors,
    really_holds,
    share_of,
)
from .measure import LEVELS, Cell

_HEAD = (
    f"{'family':36} {'sound':>12} {'cover 90':>12} {'cover 95':>12} {'cover 99':>12} "
    f"{'false sound':>12} {'false refit':>12} {'kept':>12} {'ratio':>6}"
)


def table(cells: Sequence[Cell]) -> str:
    """Shares in per cent with their binomial errors, a family a line, then all, then quantities."""
    lines = [_HEAD]
    lines += [_line(group, members) for group, members in sorted(by_group(cells).items())]
    lines += ["", _line("all families", cells), ""]
    quantities = dict.fromkeys(c.quantity for c in cells)
    lines += [_line(q, [c for c in cells if c.quantity == q]) for q in quantities]
    return "\n".join(lines)


def _line(name: str, cells: Sequence[Cell]) -> str:
    def every(cell: Cell) -> Any:
        return np.ones_like(cell.sound)

    holding = [c for c in cells if really_holds(c)]
    shares = [
        share_of(cells, lambda c: c.sound, every),
        *(coverage(cells, level) for level in range(len(LEVELS))),
        share_of(cells, lambda c: c.sound & ~c.covered[1], every),
        share_of(holding, lambda c: c.rank == 0, every),
        kept(cells),
    ]
    ratios = ratio_of_errors(cells)
    ratio = f"{np.median(ratios):6.2f}" if len(ratios) else "     –"
    return f"{name:36} " + " ".join(f"{s!s:>12}" for s in shares) + f" {ratio}"


def verdicts_on(found: Sequence[Bound], allowance: float) -> Iterator[str]:
    """One line a bound."""
    for bound in found:
        sign = "≥" if bound.at_least else "≤"
        state = "met" if bound.met(allowance) else "NOT MET"
        yield (
            f"{bound.name:48} {bound.figure:6.3f} ± {bound.error:5.3f} {sign} {bound.limit:5.3f}  "
            f"{state}"
        )


def draw(cells: Sequence[Cell], path: Path, seed: int) -> bool:
    """
    The reliability picture, where matplotlib is installed; else False.

    Left: coverage of the 95 % interval of each cell's sound estimates against the share of them,
    so that a good tool has its points in the upper right and none low. Right: reported against
    actual error of each cell, in units of the quantity's sd.
    """
    try:
        from matplotlib.figure import Figure
    except ImportError:
        return False
    figure = Figure(figsize=(11, 5), layout="constrained")
    left, right = figure.subplots(1, 2)
    for finite, colour, label in (
        (True, "#2f6f73", "finite variance"),
        (False, "#b5532a", "infinite variance"),
    ):
        chosen = [c for c in cells if c.finite == finite and c.sound.sum() >= 20]
        share = [c.sound.mean() for c in chosen]
        held = [c.covered[1][c.sound].mean() for c in chosen]
        left.plot(share, held, "o", ms=4, alpha=0.6, color=colour, label=label)
        actual = [actual_error(c) / c.scale for c in chosen]
        said = [np.median(c.error[c.sound]) / c.scale for c in chosen]
        right.loglog(actual, said, "o", ms=4, alpha=0.6, color=colour)
    left.axhspan(0.94, 0.985, color="#cccccc", alpha=0.5, lw=0, label="bounds for all together")
    left.set(
        xlabel="share of estimates called sound",
        ylabel="of these, intervals of 95 % that hold",
        ylim=(0.6, 1.005),
        title="Does a sound interval hold?",
    )
    left.legend(loc="lower right", frameon=False)
    ends = np.array(right.get_xlim())
    right.plot(ends, ends, color="#888888", lw=1)
    right.plot(ends, 1.8 * ends, color="#888888", lw=1, ls=":")
    right.set(
        xlabel="actual error, in sd",
        ylabel="reported error, in sd",
        title="Reported against actual error",
    )
    figure.suptitle(f"{len(cells)} quantities of problems with known answers, seed {seed}")
    figure.savefig(path, dpi=130)
    return True
