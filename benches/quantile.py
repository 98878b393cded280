"""Weighted quantiles of many parameters under many sets of weights."""

from __future__ import annotations

import numpy as np
import numpy.typing as npt
from timing import Case

from steelyard import _core

Array = npt.NDArray[np.float64]


def script(x: Array, w: Array, probs: Array) -> Array:
    out = np.empty((len(probs), w.shape[1], x.shape[1]))
    for j in range(x.shape[1]):
        order = np.argsort(x[:, j])
        values, weights = x[order, j], w[order]
        running = np.cumsum(weights, axis=0)
        at = (running - 0.5 * weights) / running[-1]
        for i in range(w.shape[1]):
            out[:, i, j] = np.interp(probs, at[:, i], values)
    return out


def one_by_one(x: Array, w: Array, probs: Array) -> Array:
    out = np.empty((len(probs), w.shape[1], x.shape[1]))
    for j in range(x.shape[1]):
        order = np.argsort(x[:, j])
        values = x[order, j]
        for i in range(w.shape[1]):
            weights = w[order, i]
            running = np.cumsum(weights)
            at = (running - 0.5 * weights) / running[-1]
            out[:, i, j] = np.interp(probs, at, values)
    return out


def cases(small: bool) -> list[Case]:
    rng = np.random.default_rng(4)
    x, w = rng.normal(size=(4000, 20)), np.exp(rng.normal(size=(4000, 40 if small else 200)))
    probs = np.array([0.05, 0.5, 0.95])
    order = _core.sort_order(x)
    reason = "running sums in another order, between draws 1e-3 apart"
    layout = f"20 × {w.shape[1]} × 4000"
    return [
        Case(
            "weighted quantiles",
            layout,
            lambda: script(x, w, probs),
            lambda: _core.quantile_many(x, w, probs),
            1e-10,
            reason,
            (28, None),
        ),
        Case(
            "weighted quantiles, twin vector by vector",
            layout,
            lambda: one_by_one(x, w, probs),
            lambda: _core.quantile_many(x, w, probs),
            1e-10,
            reason,
            (None, None),
        ),
        Case(
            "weighted quantiles, order known",
            layout,
            lambda: script(x, w, probs),
            lambda: _core.quantile_many(x, w, probs, order),
            1e-10,
            reason,
            (50, 85),
        ),
    ]
