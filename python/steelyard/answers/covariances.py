"""Covariances of everything asked for, as one matrix."""

from __future__ import annotations

from collections.abc import Mapping
from dataclasses import fields

import numpy as np

from steelyard import _core
from steelyard.answers.estimate import Estimate
from steelyard.answers.estimating import Scale, Series, finish, joined, study
from steelyard.answers.quantities import Quantity
from steelyard.answers.tabulate import element_names
from steelyard.arrays import in_unit
from steelyard.base.draws import Array
from steelyard.errors import QuantityError

__all__ = ["covariance_of"]

# A matrix of this many rows holds 31,375 covariances, each with its own error.
_MOST_ELEMENTS = 250


def covariance_of(scale: Scale, quantities: Mapping[str, Quantity]) -> Estimate:
    """
    Covariance matrix of all elements of the quantities, in order.

    ``Σ w (f − μ)(g − ν)``; influence ``(f − μ)(g − ν) − cov``, the delta method's for a ratio.
    """
    names = [n for label, q in quantities.items() for n in element_names(label, q)]
    columns, unit = in_unit(np.concatenate([q.columns for q in quantities.values()], axis=1))
    size = columns.shape[1]
    if size > _MOST_ELEMENTS:
        raise QuantityError(
            "quantity",
            f"at most {_MOST_ELEMENTS} elements",
            f"{size}",
            "Name the few that matter, or use resample() and numpy.cov.",
        )
    w = scale.weights.linear
    centred = columns - _core.weighted_mean(np.ascontiguousarray(columns), w)
    value, spread = np.empty((size, size)), np.empty((size, size))
    rows: list[Series] = []
    for i in range(size):
        # Only the lower triangle is studied; the upper one is copied, so both agree to the bit.
        product = centred[:, : i + 1] * centred[:, i : i + 1]
        value[i, : i + 1] = value[: i + 1, i] = _core.weighted_mean(product, w)
        psi = product - value[i, : i + 1]
        spread[i, : i + 1] = spread[: i + 1, i] = np.sqrt(_core.weighted_mean(psi**2, w))
        rows.append(study(scale, psi))
    labels = np.array(names)
    whole = Quantity(
        "covariance",
        np.broadcast_to(0.0, (scale.count, size, size)),
        ("element", "with element"),
        {"element": labels, "with element": labels},
    )
    # One unit after the other: their product may overflow where the covariance does not.
    with np.errstate(over="ignore", under="ignore"):
        flat_value = _refused_beyond_range((value * unit[:, None] * unit).reshape(-1), value)
        flat_spread = (spread * unit[:, None] * unit).reshape(-1)
    series = _symmetric(joined(rows), size)
    series = series.times(np.repeat(unit, size)).times(np.tile(unit, size))
    return finish(scale, whole, flat_value, series, flat_spread)


def _symmetric(triangle: Series, size: int) -> Series:
    """The series of the whole matrix, flat, from those of its lower triangle."""
    lower, left = np.tril_indices(size)
    matrices = []
    for figures in (getattr(triangle, field.name) for field in fields(triangle)):
        matrix = np.empty((size, size))
        matrix[lower, left] = matrix[left, lower] = figures
        matrices.append(matrix.reshape(-1))
    return Series(*matrices)


def _refused_beyond_range(shown: Array, in_units: Array) -> Array:
    """Covariances in the quantities' own units, unless these are beyond what a float64 holds."""
    lost = ~np.isfinite(shown) | ((shown == 0) & (in_units.reshape(-1) != 0))
    if lost.any():
        raise QuantityError(
            "quantity",
            "covariances between 1e-308 and 1e308 in size",
            f"{int(lost.sum())} beyond",
            "State these quantities in another unit, for example in logs.",
        )
    return shown
