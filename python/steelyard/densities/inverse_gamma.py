"""The inverse-gamma distribution."""

from __future__ import annotations

import math
from dataclasses import dataclass
from typing import Any, ClassVar

import numpy as np

from steelyard.densities.cumulative import Elementwise
from steelyard.densities.hyperparameters import Array, Hyperparameter
from steelyard.densities.special import digamma, gamma_tails, tail_flows
from steelyard.densities.tails import Tails, bounded, infinite

__all__ = ["InverseGamma"]


@dataclass(frozen=True, repr=False)
class InverseGamma(Elementwise):
    """
    Inverse-gamma distribution on ``(0, ∞)``: ``1/x`` is gamma with that shape, and rate `scale`.

    Parameters
    ----------
    shape : float, array_like or str
        Shape, positive.
    scale : float, array_like or str
        Scale, positive.

    Raises
    ------
    ArgumentError
        For a hyperparameter outside its range.

    Notes
    -----
    ``log p(x) = a log b − log Γ(a) − (a + 1) log x − b/x`` with shape a and scale b.

    Examples
    --------
    >>> import steelyard as sy
    >>> float(sy.InverseGamma(1, 1).log_density(1.0).round(6))
    -1.0
    """

    shape: Hyperparameter
    scale: Hyperparameter
    domains: ClassVar = {"shape": "positive", "scale": "positive"}
    family: ClassVar = "inverse_gamma"

    def _gradient(self, x: Array, *hyper: Array) -> Array:
        shape, scale = hyper
        return (scale / x - (shape + 1)) / x

    def _slopes(self, x: Array, *hyper: Array) -> dict[str, Array]:
        shape, scale = hyper
        return {"shape": np.log(scale / x) - digamma(shape), "scale": shape / scale - 1 / x}

    def _support(self, *hyper: Array) -> tuple[Any, Any]:
        return 0.0, math.inf

    def _tails(self, *hyper: Array) -> Tails:
        shape, scale = hyper
        power = -(shape + 1)
        return Tails(bounded(0.0, power, order=-1, speed=scale), infinite(1, 0, 0.0, power))

    def _sample(self, rng: np.random.Generator, shape: tuple[int, ...], *hyper: Array) -> Any:
        return hyper[1] / rng.standard_gamma(hyper[0], shape)

    def _log_tails(self, x: Array, *hyper: Array) -> tuple[Array, Array]:
        above, below, *_ = gamma_tails(hyper[0], hyper[1] / x)
        return below, above

    def _flows(self, x: Array, *hyper: Array) -> dict[str, Array]:
        shape, scale = hyper
        above, below, by_shape_above, by_shape = gamma_tails(shape, scale / x)
        tails = np.stack([below, above, by_shape, by_shape_above])
        (by_shape,) = tail_flows(tails, self._log_density(x, *hyper))
        return {"shape": by_shape, "scale": x / scale}
