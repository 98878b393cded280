"""Where the particles stand when moves begin: mean and covariance."""

from __future__ import annotations

from dataclasses import dataclass

import numpy as np

from steelyard import _core
from steelyard.arrays import Frozen
from steelyard.base.draws import Array

__all__ = ["Cloud", "cloud_of", "times"]

# Added to the diagonal in units of the variances: a covariance of few particles is singular.
_RIDGE = 1e-9
# Products of more multiplications go to the library's own threads: on a busy machine they wait for
# each other (measured: 22 ms instead of 0.3), and rounding could depend on their number.
_PRODUCT = 200_000
_LEAST_ROWS = 16


@dataclass(frozen=True, eq=False)
class Cloud(Frozen):
    """
    Weighted moments of the particles at a temperature, before they move.

    Attributes
    ----------
    mean : numpy.ndarray
        Shape ``(d,)``.
    root, inverse : numpy.ndarray
        Lower Cholesky factor of the covariance, and its inverse, shape ``(d, d)``.
    """

    mean: Array
    root: Array
    inverse: Array

    @property
    def dimension(self) -> int:
        return len(self.mean)

    def spread(self, z: Array) -> Array:
        """``L z`` for every row."""
        return times(z, self.root.T)

    def whiten(self, x: Array) -> Array:
        """``L⁻¹ x`` for every row, not centred."""
        return times(x, self.inverse.T)


def cloud_of(x: Array, weights: Array) -> Cloud:
    """
    Moments of weighted particles.

    The covariance is drawn towards its diagonal by ``d/(d + ESS)``: with few particles its smallest
    eigenvalues are too small, and moves scaled by it would stand still along them.
    """
    mean = _core.weighted_mean(x, weights)
    # Centred first: the kernel's columns may be far from zero beside their spread.
    covariance = _core.weighted_covariance(np.ascontiguousarray(x - mean), weights)
    diagonal = np.diag(covariance).copy()
    floor = np.finfo(np.float64).tiny
    diagonal = np.where(diagonal > floor, diagonal, floor)
    share = x.shape[1] / (x.shape[1] + 1 / float((weights**2).sum()))
    covariance = (1 - share) * covariance
    np.fill_diagonal(covariance, diagonal * (1 + _RIDGE))
    # In units of the standard deviations, so that scales far apart do not make it singular.
    unit = np.sqrt(diagonal)
    root = np.linalg.cholesky(covariance / np.outer(unit, unit)) * unit[:, None]
    inverse = np.linalg.inv(root / unit[:, None]) / unit
    return Cloud(mean, root, inverse)


def times(x: Array, matrix: Array) -> Array:
    """``x M`` by blocks of rows."""
    out = np.empty((len(x), matrix.shape[1]))
    rows = max(_LEAST_ROWS, _PRODUCT // matrix.size)
    for start in range(0, len(x), rows):
        np.matmul(x[start : start + rows], matrix, out=out[start : start + rows])
    return out
