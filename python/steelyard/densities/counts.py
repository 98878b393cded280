"""Distributions of whole numbers."""

from __future__ import annotations

from dataclasses import dataclass

import numpy as np

from steelyard.densities.cumulative import Elementwise
from steelyard.densities.hyperparameters import Array

__all__ = ["Counts"]


@dataclass(frozen=True, repr=False)
class Counts(Elementwise):
    """A family of whole numbers, which has no derivative in the value."""

    @property
    def is_discrete(self) -> bool:
        """Whether the distribution is one of whole numbers: it is."""
        return True

    def _gradient(self, x: Array, *hyper: Array) -> Array:
        return np.full_like(x, np.nan)
