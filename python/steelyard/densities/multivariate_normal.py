"""The multivariate normal distribution."""

from __future__ import annotations

import math
from dataclasses import dataclass
from typing import Any, ClassVar

import numpy as np

from steelyard.densities.distribution import Array, Distribution, Hyperparameter
from steelyard.densities.record import Resolved
from steelyard.densities.tails import Tails, infinite
from steelyard.errors import ArgumentError, PriorError, ShapeError

__all__ = ["MultivariateNormal"]

# Relative difference of two entries across the diagonal that still count as equal.
_SLACK = 1e-9


@dataclass(frozen=True, repr=False)
class MultivariateNormal(Distribution):
    """
    Multivariate normal distribution of vectors along the last axis of the value.

    Parameters
    ----------
    mean : float, array_like or str
        Mean, ``(d,)``; one number stands for all entries.
    covariance : array_like or str
        Covariance, ``(d, d)``, symmetric and positive definite.

    Raises
    ------
    ArgumentError
        For a covariance that is not square, symmetric and positive definite.

    Notes
    -----
    ``log p(x) = −½ (x − m)ᵀ Σ⁻¹ (x − m) − ½ log det Σ − ½ d log 2π``. The derivative in the
    covariance takes its entries as free: one in an off-diagonal pair is the sum of both.

    Examples
    --------
    >>> import steelyard as sy
    >>> joint = sy.MultivariateNormal([0, 0], [[1, 0.5], [0.5, 1]])
    >>> float(joint.log_density([0.0, 0.0]).round(6))
    -1.694036
    """

    mean: Hyperparameter
    covariance: Hyperparameter
    domains: ClassVar = {"mean": "real", "covariance": "real"}
    own_axes: ClassVar = {"mean": 1, "covariance": 2}

    @property
    def event_axes(self) -> int:
        """Number of last axes of a value that make one vector (1)."""
        return 1

    def _check(self) -> None:
        if not isinstance(self.covariance, str):
            _root(np.asarray(self.covariance, dtype=np.float64), ArgumentError)

    def _completed(self, shape: tuple[int, ...], hyper: Resolved) -> Resolved:
        mean, covariance = hyper
        size = covariance.shape[-1]
        if mean.ndim == 0:
            mean = np.full(size, float(mean))
        if mean.shape[-1] != size or (shape and shape[-1] != size):
            raise ShapeError(
                "MultivariateNormal: covariance",
                f"as many rows as the mean and the value have entries, {mean.shape[-1]}"
                + (f" and {shape[-1]}" if shape else ""),
                f"shape {covariance.shape}",
                "Give arguments of one dimension.",
            )
        return [mean, covariance, _root(covariance, PriorError)]

    def _log_density(self, x: Array, *hyper: Any) -> Array:
        mean, _, root = hyper
        scaled = _solve(root, x - mean)
        log_det = 2 * np.log(np.diagonal(root, axis1=-2, axis2=-1)).sum(axis=-1)
        constant = log_det + x.shape[-1] * math.log(2 * math.pi)
        out = -0.5 * ((scaled**2).sum(axis=-1) + constant)
        return np.where(np.isinf(x).any(axis=-1) & ~np.isnan(x).any(axis=-1), -np.inf, out)

    def _gradient(self, x: Array, *hyper: Any) -> Array:
        mean, covariance, _ = hyper
        return -_solve(covariance, x - mean)

    def _slopes(self, x: Array, *hyper: Any) -> dict[str, Array]:
        rise = -self._gradient(x, *hyper)
        outer = rise[..., :, None] * rise[..., None, :]
        return {"mean": rise, "covariance": 0.5 * (outer - np.linalg.inv(hyper[1]))}

    def _support(self, *hyper: Any) -> tuple[Any, Any]:
        return -math.inf, math.inf

    def _tails(self, *hyper: Any) -> Tails:
        speed = 0.5 / np.diagonal(hyper[1], axis1=-2, axis2=-1)
        return Tails(infinite(-1, 2, speed), infinite(1, 2, speed))

    def _sample(self, rng: np.random.Generator, shape: tuple[int, ...], *hyper: Any) -> Any:
        mean, _, root = hyper
        return mean + (root @ rng.standard_normal(shape)[..., None])[..., 0]


def _root(covariance: Array, error: type[ArgumentError | PriorError]) -> Array:
    """Lower Cholesky root of covariances along the last two axes."""
    shape = covariance.shape
    if len(shape) < 2 or shape[-1] != shape[-2] or shape[-1] == 0:
        _refuse(error, f"shape {shape}")
    across = np.abs(covariance - np.swapaxes(covariance, -1, -2))
    if np.any(across > _SLACK * np.abs(covariance).max(axis=(-2, -1), keepdims=True)):
        _refuse(error, f"entries across the diagonal that differ by {float(across.max()):g}")
    try:
        return np.asarray(np.linalg.cholesky(covariance), dtype=np.float64)
    except np.linalg.LinAlgError:
        least = float(np.linalg.eigvalsh(covariance).min())
        _refuse(error, f"a smallest eigenvalue of {least:.3g}")
        raise


def _refuse(error: type[ArgumentError | PriorError], came: str) -> None:
    raise error(
        "MultivariateNormal: covariance",
        "a symmetric positive definite matrix",
        came,
        "Check for parameters that depend on each other, and give the covariance, not the sds.",
    )


def _solve(matrix: Array, x: Array) -> Array:
    """``matrix⁻¹ x`` for vectors along the last axis."""
    if matrix.ndim == 2:
        flat = x.reshape(-1, x.shape[-1])
        return np.asarray(np.linalg.solve(matrix, flat.T).T.reshape(x.shape))
    return np.asarray(np.linalg.solve(matrix, x[..., None])[..., 0])
