"""The half-t distribution."""

from __future__ import annotations

import math
from dataclasses import dataclass
from typing import Any, ClassVar

import numpy as np

from steelyard.densities.cumulative import Elementwise
from steelyard.densities.hyperparameters import Array, Hyperparameter
from steelyard.densities.student_t import t_slopes, t_tail, t_tail_flow
from steelyard.densities.tails import Tails, bounded, infinite

__all__ = ["HalfStudentT"]


@dataclass(frozen=True, repr=False)
class HalfStudentT(Elementwise):
    """
    Student's t distribution folded at 0, on ``[0, ∞)``.

    Parameters
    ----------
    df : float, array_like or str
        Degrees of freedom, positive.
    scale : float, array_like or str
        Scale of the t distribution that is folded, positive.

    Raises
    ------
    ArgumentError
        For a hyperparameter outside its range.

    Notes
    -----
    Twice the density of ``StudentT(df, 0, scale)`` for x ≥ 0.

    Examples
    --------
    >>> import steelyard as sy
    >>> float(sy.HalfStudentT(4, 1).log_density(0.0).round(6))
    -0.287682
    """

    df: Hyperparameter
    scale: Hyperparameter
    domains: ClassVar = {"df": "positive", "scale": "positive"}
    family: ClassVar = "half_student_t"

    def _gradient(self, x: Array, *hyper: Array) -> Array:
        df, scale = hyper
        return t_slopes(df, x / scale)[0] / scale

    def _slopes(self, x: Array, *hyper: Array) -> dict[str, Array]:
        df, scale = hyper
        z = x / scale
        rise, by_df = t_slopes(df, z)
        return {"df": by_df, "scale": -(1 + z * rise) / scale}

    def _support(self, *hyper: Array) -> tuple[Any, Any]:
        return 0.0, math.inf

    def _tails(self, *hyper: Array) -> Tails:
        return Tails(bounded(0.0), infinite(1, 0, 0.0, -(hyper[0] + 1)))

    def _sample(self, rng: np.random.Generator, shape: tuple[int, ...], *hyper: Array) -> Any:
        df, scale = hyper
        return scale * np.abs(rng.standard_t(df, shape))

    def _log_tails(self, x: Array, *hyper: Array) -> tuple[Array, Array]:
        df, scale = hyper
        above, below, *_ = t_tail(df, x / scale)
        return below, above

    def _flows(self, x: Array, *hyper: Array) -> dict[str, Array]:
        df, scale = hyper
        whole = self._log_density(x, *hyper) + np.log(scale) - math.log(2)
        return {"df": scale * t_tail_flow(df, x / scale, whole), "scale": x / scale}
