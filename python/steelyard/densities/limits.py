"""Lower and upper limits as hyperparameters, and densities that are constant between them."""

from __future__ import annotations

from dataclasses import dataclass
from typing import Any

import numpy as np

from steelyard.densities.cumulative import Elementwise
from steelyard.densities.hyperparameters import Array, Hyperparameter
from steelyard.densities.record import Resolved
from steelyard.densities.tails import Tails, bounded
from steelyard.errors import ArgumentError, PriorError

__all__ = ["Between", "refuse_draws_out_of_order", "refuse_out_of_order"]


def refuse_out_of_order(owner: str, lower: Hyperparameter, upper: Hyperparameter) -> None:
    """Refuse numbers of which the lower limit is not below the upper."""
    if isinstance(lower, str) or isinstance(upper, str):
        return
    if np.any(np.asarray(lower) >= np.asarray(upper)):
        raise ArgumentError(
            f"{owner}: upper",
            f"a limit above lower={lower}",
            str(upper),
            "Give the lower limit first.",
        )


def refuse_draws_out_of_order(owner: str, lower: Array, upper: Array) -> None:
    """The same where a limit is a parameter's name."""
    bad = np.asarray(lower >= upper)
    if bad.any():
        raise PriorError(
            f"{owner}: upper",
            "draws of the limits in which lower is below upper",
            f"{int(bad.sum())} that are not",
            "The base prior is not the one the draws came from, or another parameter is meant.",
        )


@dataclass(frozen=True, repr=False)
class Between(Elementwise):
    """A constant density between two limits, the first two hyperparameters."""

    lower: Hyperparameter
    upper: Hyperparameter

    def _check(self) -> None:
        refuse_out_of_order(type(self).__name__, self.lower, self.upper)

    def _completed(self, shape: tuple[int, ...], hyper: Resolved) -> Resolved:
        refuse_draws_out_of_order(type(self).__name__, hyper[0], hyper[1])
        return hyper

    def _gradient(self, x: Array, *hyper: Array) -> Array:
        return np.zeros_like(x)

    def _slopes(self, x: Array, *hyper: Array) -> dict[str, Array]:
        by_width = 1 / (hyper[1] - hyper[0])
        return {"lower": by_width, "upper": -by_width}

    def _support(self, *hyper: Array) -> tuple[Any, Any]:
        return hyper[0], hyper[1]

    def _tails(self, *hyper: Array) -> Tails:
        return Tails(bounded(hyper[0]), bounded(hyper[1]))

    def _sample(self, rng: np.random.Generator, shape: tuple[int, ...], *hyper: Array) -> Any:
        share = rng.random(shape)
        return hyper[0] * (1 - share) + hyper[1] * share

    def _log_tails(self, x: Array, *hyper: Array) -> tuple[Array, Array]:
        log_width = np.log(hyper[1] - hyper[0])
        return np.log(x - hyper[0]) - log_width, np.log(hyper[1] - x) - log_width

    def _flows(self, x: Array, *hyper: Array) -> dict[str, Array]:
        lower, upper = hyper
        finite = np.isfinite(upper - lower)
        width = np.where(finite, upper - lower, 1.0)
        return {
            "lower": np.where(finite, (upper - x) / width, 0.0),
            "upper": np.where(finite, (x - lower) / width, 0.0),
        }

    def _log_mass(self, lower: Array, upper: Array, *hyper: Array) -> Array:
        width = np.minimum(upper, hyper[1]) - np.maximum(lower, hyper[0])
        full = hyper[1] - hyper[0]
        # An improper density is 1 everywhere, so that its mass is the width.
        return np.where(width > 0, np.log(width), -np.inf) - np.where(
            np.isfinite(full), np.log(full), 0.0
        )
