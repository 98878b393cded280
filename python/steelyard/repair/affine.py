"""Affine maps of draws that give them other means and spreads."""

from __future__ import annotations

import math
from dataclasses import dataclass

import numpy as np

from steelyard.base.draws import Array

__all__ = ["Affine", "Moments", "identity", "moments_of", "rematched"]


@dataclass(frozen=True, eq=False)
class Affine:
    """
    The map ``T(x) = M x + c``.

    Attributes
    ----------
    matrix : numpy.ndarray
        M, ``(d, d)``.
    shift : numpy.ndarray
        c, ``(d,)``.
    """

    matrix: Array
    shift: Array

    @property
    def log_determinant(self) -> float:
        """``log |det M|``; +inf for none."""
        sign, log = np.linalg.slogdet(self.matrix)
        return float(log) if sign != 0 else math.inf

    def __call__(self, x: Array) -> Array:
        """The points of ``(n, d)``, mapped."""
        return np.asarray(x @ self.matrix.T + self.shift)

    def inverse(self, x: Array) -> Array:
        """The points that are mapped to those of ``(n, d)``."""
        return np.ascontiguousarray(np.linalg.solve(self.matrix, (x - self.shift).T).T)


@dataclass(frozen=True, eq=False)
class Moments:
    """Mean ``(d,)``, covariance ``(d, d)``, and the effective draws that they rest on."""

    mean: Array
    covariance: Array
    draws: float


def identity(size: int) -> Affine:
    """The map that leaves everything where it is."""
    return Affine(np.eye(size), np.zeros(size))


def moments_of(x: Array, weights: Array) -> Moments:
    """Moments of ``(n, d)`` under weights ``(n,)``, which need not be normalised."""
    w = weights / weights.sum()
    mean = w @ x
    centred = x - mean
    return Moments(mean, (centred * w[:, None]).T @ centred, 1 / float((w**2).sum()))


def rematched(kind: str, old: Affine, base: Moments, wanted: Moments) -> Affine | None:
    """
    A map changed so that it carries a base to other moments.

    Parameters
    ----------
    kind : str
        ``"mean"``, ``"mean and scale"`` or ``"mean and covariance"``: what is matched.
    old : Affine
        The map so far.
    base, wanted : Moments
        Moments of the base draws, and those that they are to have.

    Returns
    -------
    Affine or None
        None where the moments have no finite, positive spread.

    Notes
    -----
    The covariance is shrunk towards that of the mapped base, by the estimated noise of its
    entries over their spread [2]_.

    References
    ----------
    .. [1] Paananen, Piironen, Bürkner, Vehtari (2021), Statistics and Computing 31.
    .. [2] Schäfer, Strimmer (2005), Stat. Appl. Genet. Mol. Biol. 4.
    """
    matrix = old.matrix
    with np.errstate(all="ignore"):
        now = matrix @ base.covariance @ matrix.T
        if kind == "mean and scale":
            ratio = np.sqrt(np.diagonal(wanted.covariance) / np.diagonal(now))
            matrix = ratio[:, None] * matrix
        elif kind == "mean and covariance":
            try:
                matrix = _turn(now, wanted) @ matrix
            except np.linalg.LinAlgError:
                return None
        shift = wanted.mean - matrix @ base.mean
    made = Affine(matrix, shift)
    usable = np.isfinite(matrix).all() and np.isfinite(shift).all()
    return made if usable and math.isfinite(made.log_determinant) else None


def _turn(now: Array, wanted: Moments) -> Array:
    """The matrix that takes one covariance to another, shrunk."""
    root = np.linalg.cholesky(now)
    inverse = np.linalg.inv(root)
    change = inverse @ wanted.covariance @ inverse.T
    diagonal = np.diagonal(change)
    noise = (np.outer(diagonal, diagonal) + change**2) / wanted.draws
    off = ~np.eye(len(change), dtype=np.bool_)
    spread = float((change[off] ** 2).sum())
    share = min(1.0, float(noise[off].sum()) / spread) if spread > 0 else 1.0
    shrunk = np.where(off, (1 - share) * change, change)
    return np.asarray(root @ np.linalg.cholesky(shrunk) @ inverse)
