"""The LKJ distribution of correlation matrices."""

from __future__ import annotations

import math
from dataclasses import dataclass
from typing import Any, ClassVar

import numpy as np

from steelyard.densities.distribution import Array, Distribution, Hyperparameter
from steelyard.densities.record import Resolved
from steelyard.densities.special import digamma, log_beta, times
from steelyard.densities.tails import Tails, bounded
from steelyard.errors import ShapeError

__all__ = ["LKJCorrelation"]

# How far a matrix may be from symmetric with a unit diagonal: float32 draws are that far off.
_SLACK = 1e-6


@dataclass(frozen=True, repr=False)
class LKJCorrelation(Distribution):
    """
    Distribution of correlation matrices along the last two axes of the value.

    Parameters
    ----------
    eta : float, array_like or str
        Shape, positive: 1 is uniform over correlation matrices, larger prefers small correlations.

    Raises
    ------
    ArgumentError
        For a shape that is not positive.

    Notes
    -----
    ``log p(R) = (η − 1) log det R − log c``, a density of the correlations below the diagonal, with
    ``log c = Σ_{k=1}^{d−1} (d − k) [(2η − 2 + d − k) log 2 + log B(a_k, a_k)]`` and
    ``a_k = η + (d − k − 1)/2`` (eq. 16 of the reference). −inf for a matrix that is not a
    correlation matrix: symmetric with a unit diagonal to 1e-6, positive definite. The derivative
    in the value takes its entries as free: in a correlation, which stands twice, it is the sum of
    both.

    References
    ----------
    Lewandowski, D., Kurowicka, D., Joe, H. (2009). Generating random correlation matrices based on
    vines and extended onion method. Journal of Multivariate Analysis 100, 1989-2001.

    Examples
    --------
    >>> import steelyard as sy
    >>> float(sy.LKJCorrelation(1).log_density([[1, 0.3], [0.3, 1]]).round(6))
    -0.693147
    """

    eta: Hyperparameter
    domains: ClassVar = {"eta": "positive"}

    @property
    def event_axes(self) -> int:
        """Number of last axes of a value that make one matrix (2)."""
        return 2

    def _completed(self, shape: tuple[int, ...], hyper: Resolved) -> Resolved:
        if shape and (len(shape) < 2 or shape[-1] != shape[-2] or shape[-1] < 2):
            raise ShapeError(
                "LKJCorrelation",
                "square matrices of two rows or more along the last two axes",
                f"shape {shape}",
                "Give whole correlation matrices.",
            )
        return [hyper[0], shape[-1] if shape else 0]

    def _log_density(self, x: Array, *hyper: Any) -> Array:
        eta, size = hyper
        rows, shapes = _vine(eta, size)
        doubled = rows * (2 * eta[..., None] - 2 + rows) * math.log(2)
        constant = (doubled + rows * log_beta(shapes, shapes)).sum(axis=-1)
        log_det = _log_determinant(x)
        inside = times(eta - 1, log_det) - constant
        return np.where(log_det == -np.inf, -np.inf, inside)

    def _gradient(self, x: Array, *hyper: Any) -> Array:
        possible = (_log_determinant(x) > -np.inf)[..., None, None]
        inverse = np.linalg.inv(np.where(possible, x, np.eye(x.shape[-1])))
        return np.asarray((hyper[0] - 1)[..., None, None] * inverse)

    def _slopes(self, x: Array, *hyper: Any) -> dict[str, Array]:
        eta, size = hyper
        rows, shapes = _vine(eta, size)
        terms = rows * (2 * math.log(2) + 2 * digamma(shapes) - 2 * digamma(2 * shapes))
        return {"eta": _log_determinant(x) - terms.sum(axis=-1)}

    def _support(self, *hyper: Any) -> tuple[Any, Any]:
        return -1.0, 1.0

    def _tails(self, *hyper: Any) -> Tails:
        eta, size = hyper
        if not size:
            raise ShapeError(
                "tails", "the shape of the value, which ends with the matrix", "()", "Pass shape=."
            )
        # Each correlation is beta distributed on (−1, 1), both shapes η − 1 + d/2.
        power = (eta - 2 + size / 2)[..., None, None]
        return Tails(bounded(-1.0, power), bounded(1.0, power))

    def _sample(self, rng: np.random.Generator, shape: tuple[int, ...], *hyper: Any) -> Any:
        eta, size = hyper
        batch = shape[:-2]
        root = np.zeros(shape)
        root[..., 0, 0] = 1.0
        left = np.ones((*batch, size))  # what is left of the unit length of each row
        for column in range(size - 1):
            a = np.broadcast_to((eta + (size - 2 - column) / 2)[..., None], (*batch, 1))
            partial = 2 * rng.beta(a, a, (*batch, size - 1 - column)) - 1
            root[..., column + 1 :, column] = partial * np.sqrt(left[..., column + 1 :])
            left[..., column + 1 :] *= (1 - partial) * (1 + partial)
            root[..., column + 1, column + 1] = np.sqrt(left[..., column + 1])
        out = root @ np.swapaxes(root, -1, -2)
        out[..., np.arange(size), np.arange(size)] = 1.0
        return out


def _vine(eta: Array, size: int) -> tuple[Array, Array]:
    """``d − k`` and the shapes ``a_k`` of the partial correlations, along a last axis."""
    rows = np.arange(size - 1, 0, -1.0)
    return rows, eta[..., None] + (rows - 1) / 2


def _log_determinant(x: Array) -> Array:
    """``log det`` of correlation matrices; −inf where it is none, NaN where it holds a NaN."""
    off = np.abs(x - np.swapaxes(x, -1, -2)).max(axis=(-2, -1))
    unit = np.abs(np.diagonal(x, axis1=-2, axis2=-1) - 1).max(axis=-1)
    rest, total = np.array(x, dtype=np.float64), np.zeros(x.shape[:-2])
    possible = (off <= _SLACK) & (unit <= _SLACK)
    # Elimination over all matrices at once; a library's Cholesky stops at the first that fails.
    for k in range(x.shape[-1]):
        pivot = rest[..., k, k]
        possible &= pivot > 0
        total = total + np.log(np.where(possible, pivot, 1.0))
        column = rest[..., k + 1 :, k]
        scaled = column / np.where(possible, pivot, 1.0)[..., None]
        rest[..., k + 1 :, k + 1 :] -= scaled[..., :, None] * column[..., None, :]
    out = np.where(possible, total, -np.inf)
    return np.where(np.isnan(x).any(axis=(-2, -1)), np.nan, out)
