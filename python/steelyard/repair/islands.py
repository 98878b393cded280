"""Islands: groups of particles that are resampled each by itself, so that they show the error."""

from __future__ import annotations

import math
from dataclasses import dataclass
from itertools import pairwise

import numpy as np

from steelyard import _core
from steelyard.base.draws import Array
from steelyard.repair.points import Rows

__all__ = ["Islands", "lineage_variance", "log_masses", "spread_start"]


@dataclass(frozen=True, eq=False)
class Islands:
    """
    How particles are laid out: islands one after the other, all of one size.

    Attributes
    ----------
    count, size : int
        Number of islands, and of particles in each.
    scheme : str
        How each is resampled.
    neighbours : bool
        Whether neighbours may be alike, since they begin with successive draws of a chain.
    """

    count: int
    size: int
    scheme: str
    neighbours: bool = False

    @property
    def particles(self) -> int:
        return self.count * self.size

    def variance(self, added: Array) -> float:
        """
        Variance of a sum to which each island adds so much, centred.

        As for independent islands; where neighbours may be alike, with their covariance if it is
        positive. Draws whose autocorrelation reaches further make islands alike beyond that.
        """
        squares = float((added**2).sum())
        if self.neighbours:
            squares += 2 * max(0.0, float((added[1:] * added[:-1]).sum()))
        return self.count / (self.count - 1) * squares

    def resample(self, log_weights: Array, many: int, generator: np.random.Generator) -> Rows:
        """`many` rows of each island, drawn by weight within it; ascending."""
        rows = []
        for island, logs in enumerate(log_weights.reshape(self.count, self.size)):
            key = generator.bytes(32)
            if not np.isfinite(logs.max()):
                # An island that has lost all its weight keeps its particles, at no weight.
                chosen = np.arange(many, dtype=np.int64) * self.size // many
            else:
                chosen = _core.resample(np.exp(logs - logs.max()), many, self.scheme, key)
            rows.append(chosen + island * self.size)
        return np.concatenate(rows)


def log_masses(log_weights: Array, islands: int) -> Array:
    """Log of the weight that each island holds, shape ``(islands,)``."""
    columns = np.ascontiguousarray(log_weights.reshape(islands, -1).T)
    return _core.log_sum_exp(columns)


def spread_start(
    count: int, log_weights: Array | None, islands: Islands, generator: np.random.Generator
) -> tuple[Rows, Array]:
    """
    Which start draw each particle is, and its log weight; the weights of all add up to one.

    Contiguous blocks of draws become islands, so that neighbours of a chain stay together and no
    draw is in two islands. Where a block has fewer draws than its island has particles, a draw
    stands several times and its copies share its weight; where it has more, they are thinned
    evenly from a random start.
    """
    edges = np.linspace(0, count, islands.count + 1).round().astype(np.int64)
    rows = []
    for start, stop in pairwise(edges.tolist()):
        length = stop - start
        places = (np.arange(islands.size) + generator.random()) * length / islands.size
        rows.append(start + np.minimum(places.astype(np.int64), length - 1))
    chosen = np.concatenate(rows)
    copies = np.bincount(chosen, minlength=count)[chosen]
    logs = -np.log(copies)
    if log_weights is not None:
        logs = logs + log_weights[chosen]
    # Blocks differ by a draw at most, but each stands for its own share of all.
    share = np.repeat(np.log(np.diff(edges)), islands.size)
    kept = np.repeat(log_masses(-np.log(copies), islands.count), islands.size)
    logs = logs + share - kept
    return chosen, logs - float(_core.log_sum_exp(logs[:, None])[0])


def lineage_variance(log_weights: Array, eve: Rows, resampled: int) -> float:
    """
    Relative variance of the mean weight from the particles' first ancestors.

    ``1 − (N/(N − 1))^(p + 1) (1 − Σ_e W_e²)``, W_e the normalised weight of all descendants of
    start draw e after p multinomial resamplings; not below zero.

    References
    ----------
    .. [1] Lee, Whiteley (2018), Biometrika 105.
    """
    count = len(eve)
    w = np.exp(log_weights - log_weights.max())
    by_eve = np.bincount(eve, weights=w / w.sum())
    factor = math.exp((resampled + 1) * -math.log1p(-1 / count))
    return max(0.0, 1 - factor * (1 - float((by_eve**2).sum())))
