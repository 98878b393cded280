"""The normal distribution."""

from __future__ import annotations

import math
from dataclasses import dataclass
from typing import ClassVar

import numpy as np

from steelyard.densities.distribution import Array, Distribution, Hyperparameter

__all__ = ["Normal"]


HALF_LOG_2PI = 0.5 * math.log(2 * math.pi)


@dataclass(frozen=True)
class Normal(Distribution):
    """
    Normal distribution.

    Parameters
    ----------
    mean : float, array_like or str
        Mean, on the scale of the parameter.
    sd : float, array_like or str
        Standard deviation, positive.

    Raises
    ------
    ArgumentError
        For a hyperparameter outside its range.

    Notes
    -----
    ``log p(x) = −½((x − mean)/sd)² − log sd − ½ log 2π``.

    Examples
    --------
    >>> import steelyard as sy
    >>> float(sy.Normal(0, 1).log_density(0.0).round(6))
    -0.918939
    """

    mean: Hyperparameter
    sd: Hyperparameter
    domains: ClassVar = {"mean": "real", "sd": "positive"}

    def _log_density(self, x: Array, *hyper: Array) -> Array:
        mean, sd = hyper
        return -0.5 * ((x - mean) / sd) ** 2 - np.log(sd) - HALF_LOG_2PI
