"""What a family of moves has to offer."""

from __future__ import annotations

from abc import ABC, abstractmethod

import numpy as np

from steelyard.base.draws import Array
from steelyard.repair.moves.cloud import Cloud
from steelyard.repair.points import Points

__all__ = ["Family"]


class Family(ABC):
    """
    Proposals for all particles at once; they are accepted by Metropolis and Hastings' rule.

    Attributes
    ----------
    name : str
        What the family is called.
    goal : float or None
        Acceptance that its scale is steered to; None for a family without a scale.
    cost : int
        Evaluations for each proposal: 2 where a gradient is needed too.
    """

    name: str
    goal: float | None = None
    cost: int = 1

    @abstractmethod
    def first_scale(self, dimension: int) -> float:
        """The scale to begin with, in units of the cloud's covariance."""

    @abstractmethod
    def propose(
        self,
        at: Points,
        temperature: float,
        cloud: Cloud,
        scale: float,
        generator: np.random.Generator,
    ) -> Array:
        """Proposed points ``(k, d)`` for the particles `at`."""

    @abstractmethod
    def correction(
        self, at: Points, proposed: Points, temperature: float, cloud: Cloud, scale: float
    ) -> Array:
        """``log g(x | x') − log g(x' | x)``, shape ``(k,)``."""
