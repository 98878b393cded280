"""A normal step that drifts along the gradient."""

from __future__ import annotations

import numpy as np

from steelyard.base.draws import Array
from steelyard.repair.moves.cloud import Cloud, times
from steelyard.repair.moves.family import Family
from steelyard.repair.points import Points

__all__ = ["Langevin"]


class Langevin(Family):
    """
    ``x' = x + ½ s² Σ ∇log π(x) + s L z``, first with ``s = 1.65 d^(−1/6)``.

    References
    ----------
    .. [1] Roberts, Rosenthal (1998), JRSS B 60.
    """

    name = "langevin"
    goal = 0.574
    cost = 2

    def first_scale(self, dimension: int) -> float:
        return float(1.65 * dimension ** (-1 / 6))

    def propose(
        self,
        at: Points,
        temperature: float,
        cloud: Cloud,
        scale: float,
        generator: np.random.Generator,
    ) -> Array:
        z = scale * generator.standard_normal(at.x.shape) + _drift(at, temperature, cloud, scale)
        return at.x + cloud.spread(z)

    def correction(
        self, at: Points, proposed: Points, temperature: float, cloud: Cloud, scale: float
    ) -> Array:
        step = cloud.whiten(proposed.x - at.x)
        there = step - _drift(at, temperature, cloud, scale)
        back = -step - _drift(proposed, temperature, cloud, scale)
        return np.asarray(0.5 * ((there**2).sum(axis=1) - (back**2).sum(axis=1)) / scale**2)


def _drift(at: Points, temperature: float, cloud: Cloud, scale: float) -> Array:
    """``½ s² Lᵀ ∇log π``: the drift in whitened coordinates."""
    return 0.5 * scale**2 * times(at.gradient(temperature), cloud.root)
