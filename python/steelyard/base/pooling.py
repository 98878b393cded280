"""Draws of several fits in one stack: which came from where, and what that does to errors."""

from __future__ import annotations

from collections.abc import Iterator, Mapping
from dataclasses import dataclass, field
from itertools import pairwise
from typing import TYPE_CHECKING

import numpy as np
import numpy.typing as npt

from steelyard.arrays import Frozen
from steelyard.verdicts import Finding

if TYPE_CHECKING:
    from steelyard.base.priors import PriorTerm

__all__ = ["Pooling", "Stratum"]

Array = npt.NDArray[np.float64]


@dataclass(frozen=True)
class Stratum:
    """One fit of a pool: its rows of the stack, where its chains start there, and its order."""

    rows: slice
    starts: npt.NDArray[np.int64]
    ordered: bool


@dataclass(frozen=True, eq=False)
class Pooling(Frozen):
    """
    How the draws of a stack were pooled.

    Attributes
    ----------
    edges : numpy.ndarray
        Where each fit's draws start in the stack, and n at the end.
    ordered : tuple of bool
        Whether the draws of each fit stand in the order they were drawn.
    own : numpy.ndarray
        Weights within each fit ``(n,)``, which sum to one over its draws.
    counts : numpy.ndarray
        What each draw counts ``(n,)``: the effective size of its fit times its weight there.
    shares : numpy.ndarray
        Shares of the fits in the mixture at each draw, ``(n, fits)``.
    constants : numpy.ndarray
        Influence series of the log constants, with sign reversed, ``(n, fits)``.
    priors : tuple of mapping
        Prior terms of each fit by label.
    same_likelihood : bool
        Whether the fits differ in prior terms only.
    findings : tuple of Finding
        What is to be said of any answer from the pool.
    reference : numpy.ndarray or None
        Log weights of the first fit's posterior where prior terms that vanish count as one: what
        ratios are added to, so that a change may reach where only other fits have draws. None
        where the first fit reaches every draw.
    impossible : mapping of str to numpy.ndarray
        Where prior terms of the first fit vanish, by label.
    """

    edges: npt.NDArray[np.int64]
    ordered: tuple[bool, ...]
    own: Array
    counts: Array
    shares: Array
    constants: Array
    priors: tuple[Mapping[str, PriorTerm], ...]
    same_likelihood: bool
    findings: tuple[Finding, ...] = ()
    reference: Array | None = None
    impossible: Mapping[str, npt.NDArray[np.bool_]] = field(default_factory=dict)

    @property
    def shared_draws(self) -> Array:
        """Effective draws that two fits share, ``Σ c P_j P_k``, shape ``(fits, fits)``."""
        return np.asarray((self.shares.T * self.counts) @ self.shares)

    def strata(self, starts: npt.NDArray[np.int64]) -> Iterator[Stratum]:
        """The fits, with the chains of the stack that each holds."""
        for (begin, end), ordered in zip(pairwise(self.edges.tolist()), self.ordered, strict=True):
            within = starts[(starts >= begin) & (starts <= end)]
            yield Stratum(slice(begin, end), within - begin, ordered)

    def centred(self, z: Array) -> Array:
        """
        Influence values ``(n, k)`` centred within each fit.

        The number of draws of each fit is fixed, so that only what varies within it is noise.
        """
        sums = np.add.reduceat(z, self.edges[:-1], axis=0)
        return np.asarray(z - self.own[:, None] * np.repeat(sums, np.diff(self.edges), axis=0))

    def carried(self, z: Array) -> Array:
        """
        The same, with what the estimated constants add to the error.

        Weights hang on the constants through ``∂ log w/∂f_k = −P_k``, so that an estimate whose
        series is z moves by ``−Σ z P_k/n`` with each.
        """
        return np.asarray(self.centred(z) - self.constants @ (self.shares.T @ z / len(z)))

    def log_weights(self, fit: int) -> Array:
        """Log weights of the posterior of one fit over all draws, up to a constant."""
        with np.errstate(divide="ignore"):
            return np.asarray(np.log(self.counts) + np.log(self.shares[:, fit]))
