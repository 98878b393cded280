"""Student's t distribution."""

from __future__ import annotations

import math
from dataclasses import dataclass
from typing import Any, ClassVar

import numpy as np

from steelyard.densities.cumulative import Elementwise
from steelyard.densities.hyperparameters import Array, Hyperparameter
from steelyard.densities.special import beta_tails, digamma
from steelyard.densities.tails import Tails, infinite

__all__ = ["StudentT", "t_slopes", "t_tail", "t_tail_flow"]


@dataclass(frozen=True, repr=False)
class StudentT(Elementwise):
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
    family: ClassVar = "student_t"

    def _gradient(self, x: Array, *hyper: Array) -> Array:
        df, location, scale = hyper
        return t_slopes(df, (x - location) / scale)[0] / scale

    def _slopes(self, x: Array, *hyper: Array) -> dict[str, Array]:
        df, location, scale = hyper
        z = (x - location) / scale
        rise, by_df = t_slopes(df, z)
        return {"df": by_df, "location": -rise / scale, "scale": -(1 + z * rise) / scale}

    def _support(self, *hyper: Array) -> tuple[Any, Any]:
        return -math.inf, math.inf

    def _tails(self, *hyper: Array) -> Tails:
        power = -(hyper[0] + 1)
        return Tails(infinite(-1, 0, 0.0, power), infinite(1, 0, 0.0, power))

    def _sample(self, rng: np.random.Generator, shape: tuple[int, ...], *hyper: Array) -> Any:
        df, location, scale = hyper
        return location + scale * rng.standard_t(df, shape)

    def _log_tails(self, x: Array, *hyper: Array) -> tuple[Array, Array]:
        df, location, scale = hyper
        z = (x - location) / scale
        tail, rest, *_ = t_tail(df, z)
        # The tail beyond |z| is half of I; 1 − I/2 is half of one plus the rest.
        outer, inner = tail - math.log(2), np.log1p(np.exp(rest)) - math.log(2)
        return np.where(z > 0, inner, outer), np.where(z > 0, outer, inner)

    def _flows(self, x: Array, *hyper: Array) -> dict[str, Array]:
        df, location, scale = hyper
        z = (x - location) / scale
        log_p = self._log_density(x, *hyper) + np.log(scale)
        by_df = np.sign(z) * scale * t_tail_flow(df, np.abs(z), log_p)
        return {"df": by_df, "location": np.ones_like(z), "scale": z}


def t_slopes(df: Array, z: Array) -> tuple[Array, Array]:
    """Derivatives of the standard log density in z and in the degrees of freedom."""
    # Large z are divided first: their squares would overflow.
    share = 1 / (1 + df / z / z)
    rise = np.where(z == 0, 0.0, -(df + 1) * share / z)
    fall = np.where(np.abs(z) > 1e100, 2 * np.log(np.abs(z)) - np.log(df), np.log1p(z * z / df))
    constant = digamma((df + 1) / 2) - digamma(df / 2) - 1 / df
    by_df = 0.5 * (constant - fall + (df + 1) / df * share)
    return rise, by_df


def t_tail(df: Array, z: Array) -> Array:
    """Beta tails of ``P(|T| > |z|) = I_x(ν/2, ½)``, ``x = ν/(ν + z²)``."""
    ratio = (z / df) * z
    return beta_tails(df / 2, 0.5, 1 / (1 + ratio), 1 / (1 + 1 / ratio))


def t_tail_flow(df: Array, z: Array, log_p: Array) -> Array:
    """Speed in the degrees of freedom of a standard quantile at z ≥ 0, where log p is `log_p`."""
    tail, _, by_a, *_ = t_tail(df, z)
    # Half of the derivative of I at fixed x, and half of dI/dx dx/dν = z p / ν.
    return np.where(z == 0, 0.0, by_a / 4 * np.exp(tail - log_p) + z / (2 * df))
