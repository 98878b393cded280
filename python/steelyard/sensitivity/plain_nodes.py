"""
The figures of nodes in plain array code, for draws that the kernel does not take.

Unordered draws of which some are the same draw again; and the twin that the kernel is held to.
"""

from __future__ import annotations

import math
from itertools import pairwise
from typing import TYPE_CHECKING

import numpy as np
import numpy.typing as npt

from steelyard import _core
from steelyard.base import Base
from steelyard.base.draws import Array
from steelyard.weighing.series import (
    chains_p_value,
    contributions_of,
    relative_efficiency,
    standard_error,
    tail_of,
)
from steelyard.weighing.trust import excursions, tail_share

if TYPE_CHECKING:
    from steelyard.sensitivity.nodes import Study

__all__ = ["ABOUT", "SERIES", "study"]

# Figures of the weights of a node, and of one series.
ABOUT = 10
SERIES = 9


def study(asked: Study, total: Array, weights: Array | None, *, smooth: bool = True) -> Array:
    """Figures of nodes with log weights `total` ``(B, n)``, one row a node."""
    rows = []
    for place, x in enumerate(total):
        about, linear, raw = _weigh(asked.base, x, smooth)
        if weights is not None:
            weights[place] = linear
        parts = [about]
        for f, mean in zip(asked.columns.rows, asked.columns.events, strict=True):
            parts += _column(asked, f, mean, (linear, raw), smooth)
        rows.append(np.concatenate(parts))
    return np.stack(rows)


def _weigh(base: Base, x: Array, smooth: bool) -> tuple[Array, Array, Array]:
    draws, column = base.draws, np.ascontiguousarray(x)[:, None]
    log_sum = float(_core.log_sum_exp(column)[0])
    raw = np.exp(x - log_sum)
    efficiency = relative_efficiency(raw[:, None], draws, base.ordered)
    logs = np.empty_like(column)
    shape = float(_core.smooth(column, efficiency, logs)[0])
    if not smooth:
        logs = column - log_sum
    linear = np.exp(logs[:, 0])
    varies = bool(np.ptp(raw) > 0)
    share = 1.0
    if base.ordered and draws.chains > 1:
        equal = np.full(draws.size, 1 / draws.size)
        share = float(chains_p_value(draws.size * linear[:, None], equal, draws)[0])
    about = [
        log_sum,
        shape,
        float(_core.effective_size(logs, False)[0]),
        float(_core.effective_size(logs, True)[0]),
        float(_core.largest_share(logs)[0]),
        tail_share(raw),
        excursions(raw, draws) if base.ordered and varies else math.inf,
        share,
        float((raw == 0).mean()),
        float(varies),
    ]
    return np.array(about), linear, raw


def _column(
    asked: Study, f: Array, mean: float, weights: tuple[Array, Array], smooth: bool
) -> list[Array]:
    w, raw = weights
    base, own, count = asked.base, asked.own, asked.base.draws.size
    moved = float(w @ f)
    z, z_raw = count * w * (f - moved), count * raw * (f - moved)
    variance = float(w @ (f - moved) ** 2)
    p = float(chains_p_value((f - moved)[:, None], w, base.draws)[0]) if base.ordered else 1.0
    sides = (0.0, 0.0) if math.isnan(mean) else _sides(f + mean > 0.5, w)
    found = [_series(base, z, z_raw, moved, variance, p, sides)]
    if asked.shift:
        # Ratios that are all the same move nothing, rounding or not.
        unmoved = not smooth or (base.log_weights is None and np.ptp(raw) == 0)
        by = 0.0 if unmoved else 1.0
        z, z_raw = by * (z - count * own.linear * f), by * (z_raw - count * own.raw * f)
        moved = by * (moved - float(own.linear @ f))
        equal = np.full(count, 1 / count)
        p = float(chains_p_value(z[:, None], equal, base.draws)[0]) if base.ordered else 1.0
        variance = float(((z - z.mean()) ** 2).mean())
        found.append(_series(base, z, z_raw, moved, variance, p, (0.0, 0.0)))
    sums = [z[start:stop].sum() for start, stop in pairwise(asked.edges.tolist())]
    return [*found, np.array(sums)]


def _sides(inside: npt.NDArray[np.bool_], w: Array) -> tuple[float, float]:
    def worth(part: Array) -> float:
        return float(part.sum() ** 2 / (part**2).sum()) if (part > 0).any() else 0.0

    return worth(w[inside]), worth(w[~inside])


def _series(
    base: Base,
    z: Array,
    z_raw: Array,
    value: float,
    variance: float,
    p: float,
    sides: tuple[float, float],
) -> Array:
    draws, ordered = base.draws, base.ordered
    efficiency = relative_efficiency(z_raw[:, None], draws, ordered)
    error = float(standard_error(z[:, None], draws, ordered)[0])
    return np.array(
        [
            value,
            variance,
            p,
            error**2 * draws.size,
            float(efficiency[0]),
            float(tail_of(z_raw[:, None], efficiency, draws, ordered)[0]),
            float(contributions_of(z[:, None], np.ones(1), draws, ordered)[0]),
            *sides,
        ]
    )
