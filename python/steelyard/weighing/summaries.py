"""Weighted quantiles, and what leaving out each observation does, for those who hold arrays."""

from __future__ import annotations

from typing import Any

import numpy as np
import numpy.typing as npt

from steelyard import _core
from steelyard.arrays import in_unit, plain_array
from steelyard.errors import ArgumentError, ShapeError
from steelyard.weighing.arrays import Array, columns_of, refuse_bad_log_weights

__all__ = ["influence", "probabilities", "quantile"]


def probabilities(probs: npt.ArrayLike, argument: str = "probs") -> Array:
    """Probabilities as an array, each in [0, 1]."""
    array = plain_array(probs, argument, "fiu").astype(np.float64)
    if not array.size:
        raise ArgumentError(argument, "at least one probability", "none", "Say which.")
    bad = ~((array >= 0) & (array <= 1))
    if bad.any():
        raise ArgumentError(
            argument,
            "probabilities from 0 to 1",
            f"{array[bad].flat[0] if array.ndim else float(array):g}",
            "Give fractions, not percentages.",
        )
    return array


def quantile(x: npt.ArrayLike, log_weights: npt.ArrayLike, probs: npt.ArrayLike) -> Any:
    """
    Weighted quantiles.

    Parameters
    ----------
    x : array_like
        Draws of a quantity, ``(n, *shape)``.
    log_weights : array_like
        Log weights ``(n,)``, need not be normalised.
    probs : array_like
        Probabilities in [0, 1].

    Returns
    -------
    float or numpy.ndarray
        Shape ``(*probs.shape, *shape)``.

    Raises
    ------
    ShapeError
        Where `x` and `log_weights` disagree.
    ArgumentError
        For a probability outside [0, 1].
    RatioError
        For NaN, +inf, or −inf for every draw.

    Notes
    -----
    The weighted empirical distribution interpolated at midpoints,
    ``F(x_(i)) = Σ_{j≤i} w_(j) − w_(i)/2``; equal values share one step of it. Equal weights give
    Hyndman and Fan's type 5.

    References
    ----------
    .. [1] Hyndman, Fan (1996), The American Statistician 50.

    Examples
    --------
    >>> from steelyard import weights
    >>> weights.quantile([1.0, 2.0, 3.0], [0.0, 0.0, 0.0], 0.5)
    2.0
    """
    columns = columns_of(x, 0, "x")
    w = _linear(log_weights, columns.values.shape[0], np.shape(x))
    p = probabilities(probs)
    out = np.empty((p.size, columns.count))
    for part, block in columns.blocks():
        wide = np.repeat(p.reshape(-1, 1), block.shape[1], axis=1)
        out[:, part] = _core.quantile(block, w, wide)
    shaped = out.reshape((*p.shape, *columns.kept_shape))
    return shaped if shaped.ndim else float(shaped)


def _linear(log_weights: npt.ArrayLike, count: int, shape: tuple[int, ...]) -> Array:
    logs = plain_array(log_weights, "log_weights", "fiu").astype(np.float64)
    if logs.shape != (count,):
        raise ShapeError(
            "log_weights", f"shape ({count},) for draws of shape {shape}", str(logs.shape), "Match."
        )
    refuse_bad_log_weights(logs[:, None], "log_weights")
    return np.asarray(np.exp(logs - logs.max()))


def influence(loglik: npt.ArrayLike, quantities: npt.ArrayLike) -> Array:
    """
    What leaving out each observation does to the mean of each quantity.

    Parameters
    ----------
    loglik : array_like
        Log likelihood ``(n, *obs)``, draws first.
    quantities : array_like
        Draws of the quantities, ``(n,)`` or ``(n, P)``.

    Returns
    -------
    numpy.ndarray
        ``Σ w^(−i) f − mean f`` in units of the base sd, ``(*obs)`` or ``(*obs, P)``, with
        ``w^(−i) ∝ exp(−L_i)`` (raw weights); NaN for a quantity that does not vary.

    Raises
    ------
    ShapeError
        Where the two disagree about the draws.
    RatioError
        For NaN, +inf or −inf in the log likelihood.

    References
    ----------
    .. [1] Gelfand, Dey, Chang (1992), Bayesian Statistics 4.

    Examples
    --------
    >>> import numpy as np
    >>> from steelyard import weights
    >>> rate = np.random.default_rng(1).normal(0.1, 0.01, size=1000)
    >>> ll = -0.5 * ((0.13 - rate) / 0.05) ** 2
    >>> weights.influence(ll[:, None], rate).shape
    (1,)
    """
    columns = columns_of(loglik, 0, "loglik")
    f = columns_of(quantities, 0, "quantities")
    if f.values.shape[0] != columns.values.shape[0]:
        raise ShapeError(
            "quantities",
            f"{columns.values.shape[0]} draws as in loglik of shape {np.shape(loglik)}",
            str(np.shape(quantities)),
            "Use the same draws in the same order.",
        )
    # Influence is in units of the sd: it does not depend on the quantity's own unit.
    values, _ = in_unit(np.require(f.values, np.float64, ["A"]))
    sd = values.std(axis=0)
    out = np.empty((columns.count, f.count))
    for part, block in columns.blocks():
        refuse_bad_log_weights(block, "loglik")
        refuse_bad_log_weights(-block, "−loglik")
        out[part] = _core.influence(block, values)
    with np.errstate(invalid="ignore", divide="ignore"):
        scaled = out / np.where(sd > 0, sd, np.nan)
    return np.asarray(scaled.reshape((*columns.kept_shape, *f.kept_shape)))
