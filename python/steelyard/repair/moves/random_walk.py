"""A normal step with the covariance of the particles."""

from __future__ import annotations

import math

import numpy as np

from steelyard.base.draws import Array
from steelyard.repair.moves.cloud import Cloud
from steelyard.repair.moves.family import Family
from steelyard.repair.points import Points

__all__ = ["RandomWalk"]


class RandomWalk(Family):
    """
    ``x' = x + s L z``, first with ``s = 2.38/√d``.

    References
    ----------
    .. [1] Roberts, Gelman, Gilks (1997), Annals of Applied Probability 7.
    """

    name = "random walk"
    goal = 0.234

    def first_scale(self, dimension: int) -> float:
        return 2.38 / math.sqrt(dimension)

    def propose(
        self,
        at: Points,
        temperature: float,
        cloud: Cloud,
        scale: float,
        generator: np.random.Generator,
    ) -> Array:
        return at.x + scale * cloud.spread(generator.standard_normal(at.x.shape))

    def correction(
        self, at: Points, proposed: Points, temperature: float, cloud: Cloud, scale: float
    ) -> Array:
        return np.zeros(len(at.x))
