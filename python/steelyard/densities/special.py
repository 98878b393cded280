"""Special functions as the densities need them, any shape."""

from __future__ import annotations

from collections.abc import Callable
from typing import Any

import numpy as np
import numpy.typing as npt

from steelyard import _core
from steelyard.densities.hyperparameters import Array

__all__ = [
    "beta_tails",
    "digamma",
    "gamma_tails",
    "log_beta",
    "log_complement",
    "log_normal_cdf",
    "log_sum",
    "skew_normal_tails",
    "tail_flows",
    "times",
]


def _apply(kernel: Callable[..., Any], *values: npt.ArrayLike) -> Array:
    """A kernel of one-dimensional arrays over any shapes; rows of results come first."""
    arrays = np.broadcast_arrays(*(np.asarray(v, dtype=np.float64) for v in values))
    out = kernel(*(np.require(a, requirements=["C", "A"]).reshape(-1) for a in arrays))
    return np.asarray(out.reshape(out.shape[:-1] + arrays[0].shape))


def digamma(x: npt.ArrayLike) -> Array:
    """Derivative of ``log Γ`` for x > 0."""
    return _apply(_core.digamma, x)


def log_beta(a: npt.ArrayLike, b: npt.ArrayLike) -> Array:
    """``log B(a, b)``."""
    return np.asarray(_apply(_core.log_beta, a, b)[0])


def log_normal_cdf(x: npt.ArrayLike) -> Array:
    """``log Φ(x)``."""
    return _apply(_core.log_normal_cdf, x)


def gamma_tails(shape: npt.ArrayLike, x: npt.ArrayLike) -> Array:
    """``log P``, ``log Q`` and their derivatives in the shape, along the first axis."""
    return _apply(_core.gamma_tails, shape, x)


def beta_tails(a: npt.ArrayLike, b: npt.ArrayLike, x: npt.ArrayLike, y: npt.ArrayLike) -> Array:
    """``log I``, ``log(1 − I)``, derivatives of the first in a and b, and of the second."""
    return _apply(_core.beta_tails, a, b, x, y)


def skew_normal_tails(z: npt.ArrayLike, slant: npt.ArrayLike) -> tuple[Array, Array]:
    """Logs of both tails of the standard skew-normal distribution."""
    below, above = _apply(_core.skew_normal_tails, z, slant)
    return below, above


def tail_flows(tails: Array, log_p: Array) -> tuple[Array, ...]:
    """
    Speeds of a quantile from log tails and their slopes, as `gamma_tails` and `beta_tails` tell.

    Each of the smaller tail: the slope of the other one is a difference of nearly equal numbers.
    """
    below, above, *slopes = tails
    in_lower = below < above
    ratio = np.exp(np.where(in_lower, below, above) - log_p)
    half = len(slopes) // 2
    pairs = zip(slopes[:half], slopes[half:], strict=True)
    return tuple(np.where(in_lower, -lower, upper) * ratio for lower, upper in pairs)


def log_complement(v: Array) -> Array:
    """``log(1 − e^v)`` for v ≤ 0."""
    return np.where(v > -np.log(2.0), np.log(-np.expm1(v)), np.log1p(-np.exp(v)))


def times(factor: Array, log: Array) -> Array:
    """A product that is 0 where the factor is, whatever the logarithm."""
    return np.where(factor == 0, 0.0, factor * log)


def log_sum(terms: Array) -> Array:
    """Log of a sum over the first axis; −inf where all terms are."""
    largest = np.max(terms, axis=0)
    centre = np.where(np.isfinite(largest), largest, 0.0)
    return np.asarray(centre + np.log(np.sum(np.exp(terms - centre), axis=0)))
