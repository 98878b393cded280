"""Do draws and log likelihood stand in the same order?"""

from __future__ import annotations

import math
from collections.abc import Iterator
from itertools import permutations

import numpy as np
import numpy.typing as npt

from steelyard.arrays import in_unit
from steelyard.base import Base
from steelyard.base.draws import Array
from steelyard.checking.findings import Finding, not_testable
from steelyard.checking.totals import likelihood_totals, parameter_columns
from steelyard.digits import short

__all__ = ["check_rows"]

_NAME = "rows aligned"
_GIVEN = "the order given"
# Below this share of explained variance an order is not recognised; ours.
_RECOGNISED = 0.3
# Another order must leave at most this share of what the given one leaves unexplained; ours.
_BETTER = 0.7

Order = npt.NDArray[np.intp]


def check_rows(base: Base) -> Finding:
    """
    Regress the log likelihood on a quadratic in the parameters, and judge on other chains.

    Near 1 where the rows are aligned, near 0 where not: a query, not proof, since several modes
    lower it too. The usual ways of getting the order wrong are tried and named.
    """
    totals = likelihood_totals(base)
    if not totals or not base.parameters:
        return not_testable(_NAME, "No log likelihood is stated.")
    y = np.sum(list(totals.values()), axis=0)
    if not np.isfinite(y).all() or np.ptp(y) == 0:
        return not_testable(_NAME, "The log likelihood is constant or not finite.")
    y = y / np.abs(y).max()
    design = _quadratic(base)
    if design is None:
        return not_testable(_NAME, "There are too many parameters for this number of draws.")
    train = _training_rows(base)
    # One decomposition serves every order: only the left-hand side changes.
    projection = np.asarray(np.linalg.pinv(design[train], rcond=1e-8), dtype=np.float64)
    shares = {
        name: _explained(design, projection, y[order], train) for name, order in _orders(base)
    }
    given = shares[_GIVEN]
    best = max(shares, key=lambda name: shares[name])
    if shares[best] < _RECOGNISED:
        return not_testable(
            _NAME,
            f"The parameters explain a share of {short(max(given, 0.0))} of the log likelihood "
            "in the order given, and no more in any other that was tried: rows in another order, "
            "several modes, or a likelihood far from a quadratic.",
            "Recompute the log likelihood of a few draws and compare.",
        )
    if best != _GIVEN and 1 - shares[best] < _BETTER * (1 - given):
        return Finding(
            _NAME,
            "found",
            given,
            _RECOGNISED,
            f"The parameters explain a share of {short(max(given, 0.0))} of the log likelihood in "
            f"the order given, but {short(shares[best])} in this one: {best}.",
            "Bring draws and log likelihood into the same order.",
        )
    return Finding(
        _NAME,
        "nothing found",
        given,
        _RECOGNISED,
        f"The parameters explain a share of {short(given)} of the log likelihood.",
    )


def _quadratic(base: Base) -> Array | None:
    """Standardised columns with squares, and products where there are draws enough."""
    columns, _ = in_unit(parameter_columns(base)[1])
    spread = columns.std(axis=0)
    z = (columns - columns.mean(axis=0))[:, spread > 0] / spread[spread > 0]
    count, size = z.shape
    if 1 + 2 * size > count / 4 or size == 0:
        return None
    parts = [np.ones((count, 1)), z, z**2 - 1]
    if 1 + 2 * size + size * (size - 1) // 2 <= count / 20:
        first, second = np.triu_indices(size, 1)
        parts.append(z[:, first] * z[:, second])
    return np.concatenate(parts, axis=1)


def _training_rows(base: Base) -> npt.NDArray[np.bool_]:
    """Half of the chains, or the first half of a single one."""
    train = np.zeros(base.draws.size, dtype=np.bool_)
    chains = base.draws.chains
    if chains > 1:
        train[: int(base.draws.starts[(chains + 1) // 2])] = True
    else:
        train[: base.draws.size // 2] = True
    return train


def _explained(design: Array, projection: Array, y: Array, train: npt.NDArray[np.bool_]) -> float:
    """Share of the held-out variance that a least-squares fit to the training rows explains."""
    rest = y[~train] - design[~train] @ (projection @ y[train])
    spread = y[~train] - y[~train].mean()
    varies = float(spread @ spread)
    return 1 - float(rest @ rest) / varies if varies > 0 else -math.inf


def _orders(base: Base) -> Iterator[tuple[str, Order]]:
    """Orders of the rows that could have been meant, by what went wrong."""
    rows = np.arange(base.draws.size)
    yield _GIVEN, rows
    yield "the log likelihood stands one draw late", np.roll(rows, -1)
    yield "the log likelihood stands one draw early", np.roll(rows, 1)
    yield "the log likelihood runs backwards", rows[::-1]
    lengths, chains = np.diff(base.draws.starts), base.draws.chains
    if chains == 1 or not (lengths == lengths[0]).all():
        return
    grid = rows.reshape(chains, -1)
    by_draw = grid.T.reshape(-1)
    yield "the log likelihood was flattened draw by draw, chains within", _inverse(by_draw)
    yield "the draws were flattened draw by draw, chains within", by_draw
    if chains <= 4:
        for order in list(permutations(range(chains)))[1:]:
            text = ", ".join(map(str, order))
            words = f"the chains of the log likelihood in the order {text}"
            yield words, grid[list(order)].reshape(-1)


def _inverse(order: Order) -> Order:
    out = np.empty_like(order)
    out[order] = np.arange(len(order))
    return out
