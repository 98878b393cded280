"""Sums, sizes and shares of log weights."""

from __future__ import annotations

from typing import Any, Literal

import numpy as np
import numpy.typing as npt

from steelyard import _core
from steelyard.errors import ArgumentError, ShapeError
from steelyard.weighing.arrays import Array, Axis, Columns, columns_of, refuse_bad_log_weights

__all__ = ["effective_size", "largest_share", "log_sum_exp", "normalise"]


def log_sum_exp(x: npt.ArrayLike, axis: Axis = None) -> Any:
    """
    Logarithm of a sum of exponentials, without overflow.

    Parameters
    ----------
    x : array_like
        Natural logarithms; −inf stands for zero.
    axis : int or tuple of int, optional
        The axis or axes of the draws; required above one dimension.

    Returns
    -------
    float or numpy.ndarray
        ``log Σ exp x``, shape of the other axes; −inf where every entry is.

    Raises
    ------
    RatioError
        For NaN or +inf.
    ArgumentError
        For an axis that is missing or not there.

    Notes
    -----
    ``m + log Σ exp(x − m)`` with m the largest entry; summed in a fixed order.

    Examples
    --------
    >>> from steelyard import weights
    >>> round(weights.log_sum_exp([-1000.0, -1000.0]), 6)
    -999.306853
    """

    def kernel(block: Array) -> Array:
        refuse_bad_log_weights(block, "x", all_zero_is_error=False)
        return _core.log_sum_exp(block)

    return columns_of(x, axis).reduce(kernel)


def normalise(log_ratio: npt.ArrayLike, axis: Axis = None, out: Array | None = None) -> Array:
    """
    Log weights that sum to one.

    Parameters
    ----------
    log_ratio : array_like
        Log weights up to a constant; −inf is a weight of zero.
    axis : int or tuple of int, optional
        The axis or axes of the draws; required above one dimension.
    out : numpy.ndarray, optional
        Float64 array of the same shape to write into.

    Returns
    -------
    numpy.ndarray
        ``log_ratio − log Σ exp log_ratio``, shape of the input; `out` where it is given.

    Raises
    ------
    RatioError
        For NaN, +inf, or −inf for every draw.
    ShapeError
        For an `out` of another shape or type.

    Examples
    --------
    >>> import numpy as np
    >>> from steelyard import weights
    >>> np.exp(weights.normalise([0.0, np.log(3.0)])).round(6).tolist()
    [0.25, 0.75]
    """
    columns = columns_of(log_ratio, axis, "log_ratio")
    result = np.empty(columns.values.shape)
    for part, block in columns.blocks():
        refuse_bad_log_weights(block, "log_ratio")
        _core.normalise(block, result[:, part])
    return deliver(columns, result, out, np.shape(log_ratio))


def deliver(columns: Columns, result: Array, out: Array | None, shape: tuple[int, ...]) -> Array:
    """The result in the input's shape, in `out` where that is given."""
    if out is None:
        return columns.restore(result)
    if not isinstance(out, np.ndarray) or out.shape != shape or out.dtype != np.float64:
        came = f"{out.shape}, {out.dtype}" if isinstance(out, np.ndarray) else type(out).__name__
        raise ShapeError("out", f"a float64 array of shape {shape}", came, "Match the input.")
    if not out.flags.writeable:
        raise ArgumentError("out", "an array that can be written", "a read-only one", "Copy it.")
    out[...] = columns.restore(result)
    return out


def effective_size(
    log_weights: npt.ArrayLike,
    axis: Axis = None,
    kind: Literal["variance", "entropy"] = "variance",
) -> Any:
    """
    Effective size of weights.

    Parameters
    ----------
    log_weights : array_like
        Log weights, need not be normalised.
    axis : int or tuple of int, optional
        The axis or axes of the draws; required above one dimension.
    kind : {"variance", "entropy"}, optional
        ``1/Σw²``, or ``exp(−Σ w log w)``.

    Returns
    -------
    float or numpy.ndarray
        Between 1 and the number of draws, shape of the other axes.

    Raises
    ------
    RatioError
        For NaN, +inf, or −inf for every draw.
    ArgumentError
        For another kind.

    References
    ----------
    .. [1] Kish (1965), Survey Sampling; Kong, Liu, Wong (1994), JASA 89.

    Examples
    --------
    >>> from steelyard import weights
    >>> weights.effective_size([0.0, 0.0, 0.0, 0.0])
    4.0
    """
    if not isinstance(kind, str) or kind not in ("variance", "entropy"):
        raise ArgumentError("kind", "'variance' or 'entropy'", repr(kind), "Choose one of them.")

    def kernel(block: Array) -> Array:
        refuse_bad_log_weights(block, "log_weights")
        return _core.effective_size(block, kind == "entropy")

    return columns_of(log_weights, axis, "log_weights").reduce(kernel)


def largest_share(log_weights: npt.ArrayLike, axis: Axis = None) -> Any:
    """
    Share of the heaviest draw.

    Parameters
    ----------
    log_weights : array_like
        Log weights, need not be normalised.
    axis : int or tuple of int, optional
        The axis or axes of the draws; required above one dimension.

    Returns
    -------
    float or numpy.ndarray
        ``max w``, shape of the other axes.

    Raises
    ------
    RatioError
        For NaN, +inf, or −inf for every draw.

    Examples
    --------
    >>> from steelyard import weights
    >>> weights.largest_share([0.0, 0.0])
    0.5
    """

    def kernel(block: Array) -> Array:
        refuse_bad_log_weights(block, "log_weights")
        return _core.largest_share(block)

    return columns_of(log_weights, axis, "log_weights").reduce(kernel)
