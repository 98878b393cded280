"""The Dirichlet distribution."""

from __future__ import annotations

from dataclasses import dataclass
from typing import Any, ClassVar

import numpy as np

from steelyard.densities.distribution import Array, Distribution, Hyperparameter
from steelyard.densities.record import Resolved
from steelyard.densities.special import digamma, log_beta, times
from steelyard.densities.tails import Tails, bounded
from steelyard.errors import ShapeError

__all__ = ["Dirichlet"]

# How far a value may be from a sum of one: float32 draws of a simplex are that far off.
_SLACK = 1e-6


@dataclass(frozen=True, repr=False)
class Dirichlet(Distribution):
    """
    Dirichlet distribution of vectors of shares, along the last axis of the value.

    Parameters
    ----------
    concentration : float, array_like or str
        Concentrations, positive, along the last axis; one number stands for all of them.

    Raises
    ------
    ArgumentError
        For a concentration that is not positive.

    Notes
    -----
    ``log p(x) = log Γ(Σ α_k) − Σ log Γ(α_k) + Σ (α_k − 1) log x_k`` where ``x_k ≥ 0`` and
    ``Σ x_k = 1`` (held to 1e-6), a density of all shares but the last. Each share is beta
    distributed.

    Examples
    --------
    >>> import steelyard as sy
    >>> float(sy.Dirichlet([1, 1, 1]).log_density([0.2, 0.3, 0.5]).round(6))
    0.693147
    """

    concentration: Hyperparameter
    domains: ClassVar = {"concentration": "positive"}
    own_axes: ClassVar = {"concentration": 1}

    @property
    def event_axes(self) -> int:
        """Number of last axes of a value that make one vector (1)."""
        return 1

    def _completed(self, shape: tuple[int, ...], hyper: Resolved) -> Resolved:
        concentration = np.asarray(hyper[0])
        if not shape:
            return [concentration]
        if concentration.ndim == 0:
            return [np.full(shape[-1], float(concentration))]
        if concentration.shape[-1] != shape[-1]:
            raise ShapeError(
                "Dirichlet: concentration",
                f"{shape[-1]} concentrations along the last axis, one a share",
                f"shape {concentration.shape}",
                "Give as many as the value has shares.",
            )
        return [concentration]

    def _log_density(self, x: Array, *hyper: Array) -> Array:
        (concentration,) = hyper
        rest = np.cumsum(concentration[..., ::-1], axis=-1)[..., ::-1]
        # B(α) is a product of beta functions of each concentration and the sum of those after it.
        constant = log_beta(concentration[..., :-1], rest[..., 1:]).sum(axis=-1)
        inside = times(concentration - 1, np.log(x)).sum(axis=-1) - constant
        possible = (x >= 0).all(axis=-1) & (np.abs(x.sum(axis=-1) - 1) <= _SLACK)
        out = np.where(possible, inside, -np.inf)
        return np.where(np.isnan(x).any(axis=-1), np.nan, out)

    def _gradient(self, x: Array, *hyper: Array) -> Array:
        return np.where(hyper[0] == 1, 0.0, (hyper[0] - 1) / x)

    def _slopes(self, x: Array, *hyper: Array) -> dict[str, Array]:
        (concentration,) = hyper
        whole = digamma(concentration.sum(axis=-1, keepdims=True))
        return {"concentration": np.log(x) - digamma(concentration) + whole}

    def _support(self, *hyper: Array) -> tuple[Any, Any]:
        return 0.0, 1.0

    def _tails(self, *hyper: Array) -> Tails:
        concentration = hyper[0]
        if concentration.ndim == 0:
            raise ShapeError(
                "tails",
                "the shape of the value, whose last axis is the number of shares",
                "()",
                "Pass shape=.",
            )
        others = concentration.sum(axis=-1, keepdims=True) - concentration
        return Tails(bounded(0.0, concentration - 1), bounded(1.0, others - 1))

    def _sample(self, rng: np.random.Generator, shape: tuple[int, ...], *hyper: Array) -> Any:
        (concentration,) = hyper
        # Γ(α) from Γ(α + 1) and a power of a uniform, in logarithms: small α underflow otherwise.
        logs = np.log(rng.standard_gamma(concentration + 1, shape))
        logs = logs + np.log(rng.random(shape)) / concentration
        shares = np.exp(logs - logs.max(axis=-1, keepdims=True))
        return shares / shares.sum(axis=-1, keepdims=True)
