"""The uniform distribution."""

from __future__ import annotations

from dataclasses import dataclass
from typing import ClassVar

from steelyard.densities.hyperparameters import Hyperparameter
from steelyard.densities.limits import Between

__all__ = ["Uniform"]


@dataclass(frozen=True, repr=False)
class Uniform(Between):
    """
    Uniform distribution between two finite limits.

    Parameters
    ----------
    lower : float, array_like or str
        Lower limit.
    upper : float, array_like or str
        Upper limit, above `lower`.

    Raises
    ------
    ArgumentError
        For limits in the wrong order or not finite; a density without limits is ``Flat()``.

    Notes
    -----
    ``log p(x) = −log(upper − lower)`` from `lower` to `upper`, both included.

    Examples
    --------
    >>> import steelyard as sy
    >>> float(sy.Uniform(0, 4).log_density(1.0).round(6))
    -1.386294
    """

    lower: Hyperparameter
    upper: Hyperparameter
    domains: ClassVar = {"lower": "real", "upper": "real"}
    family: ClassVar = "flat"
