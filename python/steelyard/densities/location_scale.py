"""Distributions of a location and a scale, known by the slope of their standard log density."""

from __future__ import annotations

import math
from abc import abstractmethod
from dataclasses import dataclass
from typing import Any

import numpy as np

from steelyard.densities.cumulative import Elementwise
from steelyard.densities.hyperparameters import Array

__all__ = ["LocationScale"]


@dataclass(frozen=True, repr=False)
class LocationScale(Elementwise):
    """A family on the whole line whose two hyperparameters are a location and a scale."""

    @staticmethod
    @abstractmethod
    def _rise(z: Array) -> Array:
        """Derivative of the standard log density."""

    def _gradient(self, x: Array, *hyper: Array) -> Array:
        location, scale = hyper
        return self._rise((x - location) / scale) / scale

    def _slopes(self, x: Array, *hyper: Array) -> dict[str, Array]:
        location, scale = hyper
        z = (x - location) / scale
        rise = self._rise(z)
        return {"location": -rise / scale, "scale": -(1 + z * rise) / scale}

    def _support(self, *hyper: Array) -> tuple[Any, Any]:
        return -math.inf, math.inf

    def _flows(self, x: Array, *hyper: Array) -> dict[str, Array]:
        z = (x - hyper[0]) / hyper[1]
        return {"location": np.ones_like(z), "scale": z}
