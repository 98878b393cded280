"""A step along the difference of two other particles."""

from __future__ import annotations

import math

import numpy as np
import numpy.typing as npt

from steelyard.base.draws import Array
from steelyard.repair.moves.cloud import Cloud
from steelyard.repair.moves.family import Family
from steelyard.repair.points import Points

__all__ = ["Differences"]

# Every tenth step has the full length of the difference: it can lead from one mode to another.
_FULL = 0.1
_NOISE = 1e-3


class Differences(Family):
    """
    ``x' = x + s (a − b) + ε`` with two particles a and b of the same island, ``s = 2.38/√(2d)``.

    References
    ----------
    .. [1] ter Braak (2006), Statistics and Computing 16.
    """

    name = "differences"
    goal = 0.234

    def first_scale(self, dimension: int) -> float:
        return 2.38 / math.sqrt(2 * dimension)

    def propose(
        self,
        at: Points,
        islands: npt.NDArray[np.int64],
        temperature: float,
        cloud: Cloud,
        scale: float,
        generator: np.random.Generator,
    ) -> Array:
        count, size = len(islands), cloud.island_size
        start = islands * size
        one = generator.integers(0, size, count)
        other = (one + generator.integers(1, size, count)) % size
        length = np.where(generator.random(count) < _FULL, 1.0, scale)
        apart = cloud.reference[start + one] - cloud.reference[start + other]
        noise = _NOISE * cloud.spread(generator.standard_normal(at.x.shape))
        return np.asarray(at.x + length[:, None] * apart + noise)

    def correction(
        self, at: Points, proposed: Points, temperature: float, cloud: Cloud, scale: float
    ) -> Array:
        return np.zeros(len(at.x))
