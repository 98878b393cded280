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
    columns = np.concatenate([q.columns for q in quantities.values()], axis=1)
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
        spread[i, : i + 1] = spread[: i + 1, i] = _core.weighted_mean(psi**2, w)
        rows.append(study(scale, psi))
    lower, left = np.tril_indices(size)
    flat = joined(rows)
    matrices = []
    for figures in (getattr(flat, field.name) for field in fields(flat)):
        matrix = np.empty((size, size))
        matrix[lower, left] = matrix[left, lower] = figures
        matrices.append(matrix.reshape(-1))
    labels = np.array(names)
    whole = Quantity(
        "covariance",
        np.broadcast_to(0.0, (scale.count, size, size)),
        ("element", "with element"),
        {"element": labels, "with element": labels},
    )
    return finish(scale, whole, value.reshape(-1), Series(*matrices), spread.reshape(-1))
