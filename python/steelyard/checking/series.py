"""Repeats, thinning, and chains of unequal quality: what the draws show of themselves."""

from __future__ import annotations

from collections.abc import Iterator
from itertools import pairwise

import numpy as np

from steelyard import _core
from steelyard.arrays import in_unit
from steelyard.base import Base
from steelyard.checking.findings import Finding, not_testable
from steelyard.checking.totals import parameter_columns
from steelyard.digits import short

__all__ = ["check_series"]

# Shares and ratios from which something is said; ours.
_REPEATS = 0.5
_UNEQUAL = 0.1
_FEW = 100.0


def check_series(base: Base) -> Iterator[Finding]:
    """Findings about repeated draws, effective draws, and chains that mix unequally."""
    if not base.parameters:
        yield not_testable("repeated draws", "There are no draws of parameters.")
        return
    groups = base.draws.repeats
    distinct = base.draws.size if groups is None else int(groups.max()) + 1
    share = 1 - distinct / base.draws.size
    yield Finding(
        "repeated draws",
        "found" if share > (_REPEATS if base.ordered else 0.0) else "nothing found",
        share,
        _REPEATS if base.ordered else 0.0,
        f"A share of {short(share)} of the draws repeats another one.",
        "Repeats count as ties; pass the draws before resampling if there were such."
        if share > (_REPEATS if base.ordered else 0.0)
        else "",
    )
    if not base.ordered:
        yield not_testable("mixing", "The draws have no order.")
        return
    yield from _mixing(base)


def _mixing(base: Base) -> Iterator[Finding]:
    names, columns = parameter_columns(base)
    columns, _ = in_unit(columns)
    variance = _core.mean_square(columns)
    lrv = _core.long_run_variance(columns, base.draws.starts, True)
    effective = np.where(lrv > 0, base.draws.size * variance / np.where(lrv > 0, lrv, 1.0), np.inf)
    worst = int(np.argmin(effective))
    few = bool(effective[worst] < _FEW)
    worth = round(min(float(effective[worst]), float(base.draws.size)))
    yield Finding(
        "mixing",
        "found" if few else "nothing found",
        float(effective[worst]),
        _FEW,
        f"The draws of {names[worst]} are worth {short(worth)} "
        "independent ones, fewer than those of any other parameter.",
        "Run the base longer before asking what-ifs of it." if few else "",
    )
    if base.draws.chains == 1 or int(np.diff(base.draws.starts).min()) < 50:
        yield not_testable("chains alike", "There is one chain, or chains are short.")
        return
    each = []
    for start, stop in pairwise(base.draws.starts.tolist()):
        part, alone = columns[start:stop], np.array([0, stop - start], dtype=np.int64)
        own = _core.long_run_variance(part, alone, True)
        spread = _core.mean_square(part)
        each.append(np.where(own > 0, spread / np.where(own > 0, own, 1.0), 1.0))
    efficiency = np.array(each)
    ratio = efficiency.min(axis=0) / efficiency.max(axis=0)
    # One parameter may look bad by chance; the median over parameters of a bad chain does not.
    figure = float(np.median(efficiency, axis=1).min() / np.median(efficiency, axis=1).max())
    unequal = figure < _UNEQUAL
    chain = int(np.argmin(np.median(efficiency, axis=1)))
    yield Finding(
        "chains alike",
        "found" if unequal else "nothing found",
        figure,
        _UNEQUAL,
        f"The worst chain (number {chain}) mixes at {short(figure)} times the speed of the best"
        f"{'' if unequal else f'; parameter by parameter at least {short(float(ratio.min()))}'}.",
        "Look at that chain; answers without it are another fit." if unequal else "",
    )
