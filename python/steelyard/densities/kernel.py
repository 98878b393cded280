"""Values and hyperparameters laid out for the kernel of log densities."""

from __future__ import annotations

import math
from typing import Any

import numpy as np

from steelyard import _core
from steelyard.densities.hyperparameters import Array

__all__ = ["log_density"]


def log_density(family: str, x: Array, hyper: tuple[Array, ...]) -> Array:
    """
    Log density of a family at every entry of `x`.

    Hyperparameters that are one number, or one a row, a column or an entry, reach the kernel
    without being spread out over all entries.
    """
    if all(h.ndim == 0 for h in hyper):
        shape, laid_out, repeat = x.shape, [h.reshape(1) for h in hyper], 1
    else:
        shape = np.broadcast_shapes(x.shape, *(h.shape for h in hyper))
        first, last = _axes_that_vary(shape, hyper)
        laid_out = [_over(h, len(shape), first, shape[first:last]) for h in hyper]
        repeat = math.prod(shape[last:])
    if shape != x.shape:
        x = np.broadcast_to(x, shape)
    flat = np.require(x, np.float64, ["C", "A"]).reshape(-1)
    out = np.empty(flat.shape)
    _core.log_density(family, flat, laid_out, repeat, out)
    return out.reshape(shape)


def _axes_that_vary(shape: tuple[int, ...], hyper: tuple[Array, ...]) -> tuple[int, int]:
    """Range of axes along which some hyperparameter has more than one entry."""
    axes = [
        axis + len(shape) - h.ndim for h in hyper for axis in range(h.ndim) if h.shape[axis] != 1
    ]
    return (min(axes), max(axes) + 1) if axes else (0, 0)


def _over(values: Array, axes: int, first: int, block: tuple[int, ...]) -> Any:
    """A hyperparameter over those axes, contiguous, as one row."""
    full = values.reshape((1,) * (axes - values.ndim) + values.shape)
    inner = full.reshape(full.shape[first : first + len(block)])
    return np.require(np.broadcast_to(inner, block), np.float64, ["C", "A"]).reshape(-1)
