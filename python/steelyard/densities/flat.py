"""Constant densities, proper or not."""

from __future__ import annotations

import math
from dataclasses import dataclass
from typing import ClassVar

import numpy as np

from steelyard.densities.hyperparameters import Hyperparameter
from steelyard.densities.limits import Between

__all__ = ["Flat"]


@dataclass(frozen=True, repr=False)
class Flat(Between):
    """
    Constant density between two limits, or everywhere.

    Between finite limits the density is proper and equals ``1/(upper − lower)``. With an
    infinite limit it is improper: its log density is 0, it can be swapped in and out, and a ratio
    of evidences is refused.

    Parameters
    ----------
    lower : float, array_like or str, optional
        Lower limit.
    upper : float, array_like or str, optional
        Upper limit, above `lower`.

    Raises
    ------
    ArgumentError
        For limits in the wrong order or NaN.

    Notes
    -----
    ``log p(x) = −log(upper − lower)``, or 0 where a limit is infinite.

    Examples
    --------
    >>> import steelyard as sy
    >>> sy.Flat().is_proper, sy.Flat(0, 2).is_proper
    (False, True)
    """

    lower: Hyperparameter = -math.inf
    upper: Hyperparameter = math.inf
    domains: ClassVar = {"lower": "limit", "upper": "limit"}
    family: ClassVar = "flat"

    @property
    def is_proper(self) -> bool:
        """Whether both limits are finite (a named limit is: it has draws)."""
        limits = (self.lower, self.upper)
        return all(isinstance(v, str) or bool(np.all(np.isfinite(v))) for v in limits)
