"""Pareto smoothing of the largest weights, and the tail shape that it finds."""

from __future__ import annotations

from typing import Any, NamedTuple

import numpy as np
import numpy.typing as npt

from steelyard import _core
from steelyard.arrays import plain_array
from steelyard.errors import ArgumentError, ShapeError
from steelyard.weighing.arrays import Array, Axis, Columns, columns_of, refuse_bad_log_weights
from steelyard.weighing.reductions import deliver

__all__ = ["Smoothed", "smooth", "tail_shape"]


class Smoothed(NamedTuple):
    """Smoothed, normalised log weights and the tail shape that was fitted."""

    log_weights: Array
    tail_shape: Any


def smooth(
    log_ratio: npt.ArrayLike,
    axis: Axis = None,
    relative_efficiency: npt.ArrayLike = 1.0,
    out: Array | None = None,
) -> Smoothed:
    """
    Smooth the largest weights by a generalised Pareto fit.

    Parameters
    ----------
    log_ratio : array_like
        Log weights up to a constant; −inf is a weight of zero and stays one.
    axis : int or tuple of int, optional
        The axis or axes of the draws; required above one dimension.
    relative_efficiency : array_like, optional
        ``min(1, var/long-run variance)`` of the weights over the chains, in (0, 1]; one number,
        or one a column. 1 for independent draws.
    out : numpy.ndarray, optional
        Float64 array of the same shape to write into.

    Returns
    -------
    Smoothed
        ``log_weights`` (normalised, shape of the input) and ``tail_shape`` (shape of the other
        axes; +inf where fewer than five draws are in the tail, −inf where it is constant).

    Raises
    ------
    RatioError
        For NaN, +inf, or −inf for every draw.
    ArgumentError
        For an efficiency outside (0, 1].

    Notes
    -----
    The ``M = ceil(min(0.2 S, 3 sqrt(S/e)))`` largest weights are replaced by the quantiles at
    ``(z − ½)/M`` of the distribution fitted to their exceedances over the next largest weight, in
    rank order, capped at the largest raw weight. Shapes are shrunk by ``(M k + 5)/(M + 10)``.

    References
    ----------
    .. [1] Vehtari, Simpson, Gelman, Yao, Gabry (2024), JMLR 25.
    .. [2] Zhang, Stephens (2009), Technometrics 51.

    Examples
    --------
    >>> import numpy as np
    >>> from steelyard import weights
    >>> x = np.random.default_rng(3).exponential(size=4000)
    >>> log_weights, shape = weights.smooth(0.5 * x)
    >>> bool(0.3 < shape < 0.7)
    True
    """
    columns = columns_of(log_ratio, axis, "log_ratio")
    efficiency = _efficiency(relative_efficiency, columns)
    result = np.empty(columns.values.shape)
    shapes = np.empty(columns.count)
    for part, block in columns.blocks():
        refuse_bad_log_weights(block, "log_ratio")
        shapes[part] = _core.smooth(block, efficiency[part], result[:, part])
    delivered = deliver(columns, result, out, np.shape(log_ratio))
    return Smoothed(delivered, columns.reduce_given(shapes))


def tail_shape(
    log_ratio: npt.ArrayLike, axis: Axis = None, relative_efficiency: npt.ArrayLike = 1.0
) -> Any:
    """
    Tail shape of weights: their moments of order up to one over it exist.

    Parameters
    ----------
    log_ratio : array_like
        Log weights up to a constant.
    axis : int or tuple of int, optional
        The axis or axes of the draws; required above one dimension.
    relative_efficiency : array_like, optional
        As for :func:`smooth`.

    Returns
    -------
    float or numpy.ndarray
        The shape that :func:`smooth` finds, shape of the other axes.

    Raises
    ------
    RatioError, ArgumentError
        As for :func:`smooth`.

    Examples
    --------
    >>> import numpy as np
    >>> from steelyard import weights
    >>> weights.tail_shape(np.zeros(100))
    -inf
    """
    columns = columns_of(log_ratio, axis, "log_ratio")
    efficiency = _efficiency(relative_efficiency, columns)
    shapes = np.empty(columns.count)
    for part, block in columns.blocks():
        refuse_bad_log_weights(block, "log_ratio")
        shapes[part] = _core.tail_shape(block, efficiency[part])
    return columns.reduce_given(shapes)


def _efficiency(value: npt.ArrayLike, columns: Columns) -> Array:
    array = plain_array(value, "relative_efficiency", "fiu").astype(np.float64)
    if array.ndim and array.shape != columns.kept_shape:
        raise ShapeError(
            "relative_efficiency",
            f"one number, or shape {columns.kept_shape}",
            str(array.shape),
            "Give one a column.",
        )
    bad = ~((array > 0) & (array <= 1))
    if bad.any():
        raise ArgumentError(
            "relative_efficiency",
            "numbers in (0, 1]",
            f"{array[bad].flat[0]:g}" if array.ndim else f"{float(array):g}",
            "Cut values above 1 to 1.",
        )
    return np.ascontiguousarray(np.broadcast_to(array.reshape(-1), (columns.count,)))
