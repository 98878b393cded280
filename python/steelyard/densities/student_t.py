"""Student's t distribution."""

from __future__ import annotations

import math
from dataclasses import dataclass
from typing import ClassVar

import numpy as np

from steelyard.densities.distribution import Array, Distribution, Hyperparameter
from steelyard.densities.special import log_gamma

__all__ = ["StudentT"]


@dataclass(frozen=True)
class StudentT(Distribution):
    """
    Student's t distribution with location and scale.

    Parameters
    ----------
    df : float, array_like or str
        Degrees of freedom, positive.
    location : float, array_like or str
        Location (the median).
    scale : float, array_like or str
        Scale, positive; not the standard deviation.

    Raises
    ------
    ArgumentError
        For a hyperparameter outside its range.

    Notes
    -----
    ``log p(x) = log Γ((ν+1)/2) − log Γ(ν/2) − ½ log(νπ) − log scale − (ν+1)/2 log(1 + z²/ν)``,
    ``z = (x − location)/scale``.

    Examples
    --------
    >>> import steelyard as sy
    >>> float(sy.StudentT(4, 0, 1).log_density(0.0).round(6))
    -0.980829
    """

    df: Hyperparameter
    location: Hyperparameter
    scale: Hyperparameter
    domains: ClassVar = {"df": "positive", "location": "real", "scale": "positive"}

    def _log_density(self, x: Array, *hyper: Array) -> Array:
        df, location, scale = hyper
        constant = log_gamma((df + 1) / 2) - log_gamma(df / 2) - 0.5 * np.log(df * math.pi)
        z = np.abs((x - location) / scale)
        tail = np.where(
            z > 1e100, 2 * np.log(np.maximum(z, 1.0)) - np.log(df), np.log1p(z * z / df)
        )
        return constant - np.log(scale) - 0.5 * (df + 1) * tail
