"""Blocks of parameters carried to and from the whole real space, with their log Jacobians."""

from __future__ import annotations

from abc import ABC, abstractmethod
from collections.abc import Callable
from dataclasses import dataclass
from typing import Any

import numpy as np
import numpy.typing as npt

from steelyard.base.draws import Array

__all__ = [
    "Ascending",
    "Block",
    "Columns",
    "Correlation",
    "Interval",
    "Limits",
    "LookUp",
    "Simplex",
    "constant_limits",
    "from_line",
    "to_line",
]

Columns = npt.NDArray[np.int64]
LookUp = Callable[[str], Array]
# Limits of the columns of a block, shape (1 or n, columns), from the values known so far.
Limits = Callable[[LookUp, int], tuple[Array, Array]]


@dataclass(frozen=True, eq=False)
class Block(ABC):
    """
    Some columns of the parameters, carried together.

    Attributes
    ----------
    columns : numpy.ndarray
        Positions among all elements of all parameters.
    """

    columns: Columns

    @property
    @abstractmethod
    def size(self) -> int:
        """Number of unconstrained coordinates."""

    @abstractmethod
    def to_free(self, values: Array, look_up: LookUp) -> Array:
        """Coordinates ``(n, size)`` of values ``(n, columns)``."""

    @abstractmethod
    def from_free(self, x: Array, look_up: LookUp) -> tuple[Array, Array]:
        """Values ``(n, columns)`` at coordinates, and ``log |det ∂values/∂x|`` ``(n,)``."""


@dataclass(frozen=True, eq=False)
class Interval(Block):
    """
    Numbers between limits, each by itself.

    No limit: the value itself. A lower limit a: ``log(v − a)``; an upper limit b: ``log(b − v)``;
    both: ``log((v − a)/(b − v))``.
    """

    limits: Limits

    @property
    def size(self) -> int:
        """One a column."""
        return len(self.columns)

    def to_free(self, values: Array, look_up: LookUp) -> Array:
        """Coordinates of values; infinite at a limit itself."""
        return to_line(values, *self.limits(look_up, len(values)))

    def from_free(self, x: Array, look_up: LookUp) -> tuple[Array, Array]:
        """Values, and the sum of the log derivatives."""
        values, slopes = from_line(x, *self.limits(look_up, len(x)))
        return values, slopes.sum(axis=1)


@dataclass(frozen=True, eq=False)
class Ascending(Block):
    """
    A vector in ascending order between limits that all of its elements share.

    Each element goes to the real line as in `Interval`, which keeps the order; then the first
    coordinate is the first element, and the others are logs of the steps.
    """

    limits: Limits

    @property
    def size(self) -> int:
        """One an element."""
        return len(self.columns)

    def to_free(self, values: Array, look_up: LookUp) -> Array:
        """Coordinates of ascending values."""
        line = to_line(values, *self.limits(look_up, len(values)))
        with np.errstate(divide="ignore", invalid="ignore"):
            return np.concatenate([line[:, :1], np.log(np.diff(line, axis=1))], axis=1)

    def from_free(self, x: Array, look_up: LookUp) -> tuple[Array, Array]:
        """Values; the steps have log derivatives that are the coordinates themselves."""
        with np.errstate(over="ignore"):
            line = np.cumsum(np.concatenate([x[:, :1], np.exp(x[:, 1:])], axis=1), axis=1)
        values, slopes = from_line(line, *self.limits(look_up, len(x)))
        return values, slopes.sum(axis=1) + x[:, 1:].sum(axis=1)


@dataclass(frozen=True, eq=False)
class Simplex(Block):
    """
    Vectors of `width` shares with a sum of one; the density is one of all shares but the last.

    Share k takes the part ``z_k = 1/(1 + (K − k) exp(−x_k))`` of what the shares before it left
    (k from 1 to K − 1), so that zero coordinates are equal shares.
    """

    width: int

    @property
    def size(self) -> int:
        """One less than shares, a vector."""
        return len(self.columns) // self.width * (self.width - 1)

    def to_free(self, values: Array, look_up: LookUp) -> Array:
        """Log odds of the parts, centred at equal shares."""
        shares = values.reshape(len(values), -1, self.width)
        # What is left, summed from the far end: 1 − Σ loses the digits of small shares.
        left = np.cumsum(shares[..., ::-1], axis=-1)[..., ::-1][..., 1:]
        with np.errstate(divide="ignore"):
            odds = np.log(shares[..., :-1]) - np.log(left) + np.log(self._after)
        return np.asarray(odds.reshape(len(values), self.size))

    def from_free(self, x: Array, look_up: LookUp) -> tuple[Array, Array]:
        """Shares, and ``Σ_k log z_k + log(1 − z_k) + log left_k``."""
        odds = x.reshape(len(x), -1, self.width - 1) - np.log(self._after)
        log_part, log_rest = -np.logaddexp(0, -odds), -np.logaddexp(0, odds)
        log_left = np.concatenate([np.zeros_like(odds[..., :1]), np.cumsum(log_rest, -1)], axis=-1)
        shares = np.exp(np.concatenate([log_part + log_left[..., :-1], log_left[..., -1:]], -1))
        log_jacobian = (log_part + log_rest + log_left[..., :-1]).sum(axis=(1, 2))
        return shares.reshape(len(x), -1), np.asarray(log_jacobian)

    @property
    def _after(self) -> Array:
        return np.arange(self.width - 1, 0, -1.0)


@dataclass(frozen=True, eq=False)
class Correlation(Block):
    """
    Correlation matrices of `width` rows; the density is one of the correlations below the diagonal.

    Row i of the Cholesky factor has partial correlations ``z_ij = tanh x_ij``:
    ``L_ij = z_ij √(1 − Σ_{k<j} L_ik²)``. The Jacobian from z to L is the product of those roots,
    and that from L to the correlations ``Π_i L_ii^(K − i)`` with i from 1 (Lewandowski, Kurowicka,
    Joe 2009 for partial correlations).
    """

    width: int

    @property
    def size(self) -> int:
        """``K (K − 1)/2`` a matrix."""
        return len(self.columns) // self.width**2 * (self.width * (self.width - 1) // 2)

    def to_free(self, values: Array, look_up: LookUp) -> Array:
        """Inverse hyperbolic tangents of the partial correlations."""
        matrices = values.reshape(len(values), -1, self.width, self.width)
        factor = np.linalg.cholesky((matrices + np.swapaxes(matrices, -1, -2)) / 2)
        out = []
        for row in range(1, self.width):
            left = np.ones(factor.shape[:2])
            for column in range(row):
                entry = factor[..., row, column]
                out.append(np.arctanh(np.clip(entry / np.sqrt(left), -1.0, 1.0)))
                left = np.maximum(left - entry**2, np.finfo(float).tiny)
        return np.stack(out, axis=-1).reshape(len(values), self.size)

    def from_free(self, x: Array, look_up: LookUp) -> tuple[Array, Array]:
        """Matrices, and their log Jacobian."""
        free = x.reshape(len(x), -1, self.width * (self.width - 1) // 2)
        factor = np.zeros((*free.shape[:2], self.width, self.width))
        factor[..., 0, 0] = 1.0
        log_jacobian, place = np.zeros(free.shape[:2]), 0
        for row in range(1, self.width):
            log_left = np.zeros(free.shape[:2])  # of 1 − Σ L², kept on the log scale
            for column in range(row):
                z = free[..., place]
                # log(1 − tanh² z) without loss where |z| is large.
                log_rest = 2 * (np.log(2) - np.abs(z) - np.log1p(np.exp(-2 * np.abs(z))))
                factor[..., row, column] = np.tanh(z) * np.exp(log_left / 2)
                log_jacobian += log_rest + log_left / 2
                log_left = log_left + log_rest
                place += 1
            factor[..., row, row] = np.exp(log_left / 2)
            log_jacobian += (self.width - 1 - row) * log_left / 2
        matrices = factor @ np.swapaxes(factor, -1, -2)
        diagonal = np.arange(self.width)
        matrices[..., diagonal, diagonal] = 1.0
        return matrices.reshape(len(x), -1), np.asarray(log_jacobian.sum(axis=1))


def to_line(values: Array, lower: Array, upper: Array) -> Array:
    """Values between limits on the real line; infinite at a limit itself."""
    has_lower, has_upper = np.isfinite(lower), np.isfinite(upper)
    below = np.where(has_lower, values - np.where(has_lower, lower, 0.0), 1.0)
    above = np.where(has_upper, np.where(has_upper, upper, 0.0) - values, 1.0)
    with np.errstate(divide="ignore", invalid="ignore"):
        logs = np.log(below) - np.where(has_lower | ~has_upper, np.log(above), -np.log(above))
    return np.asarray(np.where(has_lower | has_upper, logs, values))


def from_line(x: Array, lower: Array, upper: Array) -> tuple[Array, Array]:
    """Values between limits, and the logs of their derivatives."""
    has_lower, has_upper = np.isfinite(lower), np.isfinite(upper)
    both = has_lower & has_upper
    low, high = np.where(has_lower, lower, 0.0), np.where(has_upper, upper, 0.0)
    with np.errstate(over="ignore", under="ignore"):
        log_part, log_rest = -np.logaddexp(0, -x), -np.logaddexp(0, x)
        # Counted from the nearer limit, so that values close to it keep their digits.
        inside = np.where(
            x < 0, low + (high - low) * np.exp(log_part), high - (high - low) * np.exp(log_rest)
        )
        grown = np.exp(x)
    half = np.where(has_lower, low + grown, np.where(has_upper, high - grown, x))
    width = np.where(both, high - low, 1.0)
    slopes = np.where(
        both, np.log(width) + log_part + log_rest, np.where(has_lower | has_upper, x, 0.0)
    )
    values = np.where(both, inside, half)
    # Where rounding puts a value on its limit there is no density to speak of.
    on_limit = (has_lower & (values <= low)) | (has_upper & (values >= high))
    return values, np.where(on_limit, -np.inf, slopes)


def constant_limits(lower: Any, upper: Any) -> Limits:
    """Limits that are numbers."""
    low = np.atleast_2d(np.asarray(lower, dtype=np.float64))
    high = np.atleast_2d(np.asarray(upper, dtype=np.float64))
    return lambda look_up, count: (low, high)
