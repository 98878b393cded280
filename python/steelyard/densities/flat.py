"""Constant densities, proper or not."""

from __future__ import annotations

import math
from dataclasses import dataclass
from typing import Any, ClassVar

import numpy as np

from steelyard.densities.distribution import Array, Distribution, Hyperparameter
from steelyard.errors import ArgumentError

__all__ = ["Flat"]


@dataclass(frozen=True)
class Flat(Distribution):
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

    def __post_init__(self) -> None:
        super().__post_init__()
        limits = (self.lower, self.upper)
        if not any(isinstance(v, str) for v in limits) and np.any(
            np.asarray(self.lower) >= np.asarray(self.upper)
        ):
            raise ArgumentError(
                "Flat: upper",
                f"a limit above lower={self.lower}",
                str(self.upper),
                "Give the lower limit first.",
            )

    @property
    def is_proper(self) -> bool:
        """Whether both limits are finite (a named limit is: it has draws)."""
        return all(isinstance(v, str) or bool(np.all(np.isfinite(v))) for v in self._values())

    def _log_density(self, x: Array, *hyper: Array) -> Array:
        width = hyper[1] - hyper[0]
        return np.broadcast_to(np.where(np.isfinite(width), -np.log(width), 0.0), x.shape)

    def _support(self, *hyper: Array) -> tuple[Any, Any]:
        return hyper[0], hyper[1]
