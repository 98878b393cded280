"""Pareto smoothing."""

from __future__ import annotations

import math

import numpy as np
import numpy.typing as npt
from timing import Case

from steelyard import _core

Array = npt.NDArray[np.float64]


def fit(x: Array) -> tuple[float, float]:
    """Shape and scale of a generalised Pareto distribution (Zhang & Stephens 2009)."""
    count = len(x)
    points = 20 + math.isqrt(count)
    root = np.sqrt(points / (np.arange(1, points + 1) - 0.5))
    grid = 1 / x[-1] + (1 - root) / (3 * x[int(count / 4 + 0.5) - 1])
    shapes = np.log1p(-grid[:, None] * x).mean(axis=1)
    profile = count * (np.log(-grid / shapes) - shapes - 1)
    weights = np.exp(profile - profile.max())
    b = (grid * weights).sum() / weights.sum()
    shape = float(np.log1p(-b * x).mean())
    return shape, -shape / b


def smoothed_column(x: Array, length: int, p: Array, out: Array | None) -> float:
    z = x - x.max()
    order = np.argsort(z)
    cutoff, tail = np.exp(z[order[-length - 1]]), order[-length:]
    shape, scale = fit(np.exp(z[tail]) - cutoff)
    shape = (length * shape + 5) / (length + 10)
    if out is not None:
        quantiles = scale * np.expm1(-shape * np.log1p(-p)) / shape
        z[tail] = np.log(np.minimum(cutoff + quantiles, 1))
        most = z.max()
        out[:] = z - most - np.log(np.exp(z - most).sum())
    return shape


def script(x: Array, out: Array | None) -> tuple[Array, ...]:
    draws, columns = x.shape
    length = math.ceil(min(0.2 * draws, 3 * math.sqrt(draws)))
    p = (np.arange(length) + 0.5) / length
    shapes = np.array(
        [
            smoothed_column(x[:, j], length, p, None if out is None else out[:, j])
            for j in range(columns)
        ]
    )
    return (shapes,) if out is None else (shapes, out)


def cases(small: bool) -> list[Case]:
    draws, columns = 4000, 400 if small else 4000
    x = 1.3 * np.random.default_rng(2).normal(size=(draws, columns))
    rows, ones = np.ascontiguousarray(x.T).T, np.ones(columns)
    out, twin_out = np.full_like(x, 1.0), np.full_like(x, 1.0)
    rows_out = np.full_like(rows, 1.0)
    reason = "shapes by products instead of sums of logarithms"

    def ours(data: Array, into: Array) -> tuple[Array, Array]:
        return _core.smooth(data, ones, into), into

    size = f"({draws}, {columns})"
    return [
        Case(
            "Pareto smoothing, out=",
            f"{size} C",
            lambda: script(x, twin_out),
            lambda: ours(x, out),
            1e-10,
            reason,
            (9.5, 15),
            rounds=3,
        ),
        Case(
            "Pareto smoothing, out=",
            f"{size} Fortran",
            lambda: script(rows, twin_out),
            lambda: ours(rows, rows_out),
            1e-10,
            reason,
            (9.5, 15),
            rounds=3,
        ),
        Case(
            "tail shapes only",
            f"{size} C",
            lambda: script(x, None),
            lambda: _core.tail_shape(x, ones),
            1e-10,
            reason,
            (12, 22),
            rounds=3,
        ),
    ]
