"""A weighted mixture of distributions."""

from __future__ import annotations

from dataclasses import dataclass
from typing import Any, ClassVar

import numpy as np

from steelyard.densities.cumulative import Cumulative, log_tails_at
from steelyard.densities.distribution import Distribution
from steelyard.densities.hyperparameters import Array, Hyperparameter
from steelyard.densities.record import Resolved
from steelyard.densities.special import log_sum
from steelyard.densities.tails import Tail, Tails, heavier
from steelyard.errors import ArgumentError, ArgumentTypeError, PriorError, ShapeError

__all__ = ["Mixture"]

# How far weights may be from a sum of one: float32 draws of a simplex are that far off.
_SLACK = 1e-6


@dataclass(frozen=True, repr=False)
class Mixture(Cumulative):
    """
    A weighted mixture of distributions of one kind.

    Parameters
    ----------
    weights : array_like or str
        Weights of the components along the last axis, 0 or above, with a sum of one.
    components : sequence of Distribution
        What is mixed: all continuous or all discrete, all of numbers, of vectors or of matrices.

    Raises
    ------
    ArgumentTypeError
        Where a component is not a distribution.
    ArgumentError
        For weights that are negative, too few or too many, or do not sum to one, and for
        components of different kinds.

    Notes
    -----
    ``log p(x) = log Σ_k w_k p_k(x)``. The derivative in a weight, ``p_k/p``, takes the others as
    fixed; along weights that keep their sum, differences of these count. The support is the
    smallest interval that holds those of all components with a positive weight.

    Examples
    --------
    >>> import steelyard as sy
    >>> near, wide = sy.Normal(0, 1), sy.Normal(0, 10)
    >>> float(sy.Mixture([0.9, 0.1], [near, wide]).log_density(0.0).round(6))
    -1.013249
    """

    weights: Hyperparameter
    components: tuple[Distribution, ...]
    domains: ClassVar = {"weights": "share", "components": "distributions"}
    own_axes: ClassVar = {"weights": 1}

    def _check(self) -> None:
        if not isinstance(self.components, list | tuple):
            raise ArgumentTypeError(
                "Mixture: components",
                "a sequence of distributions",
                str(self.components),
                "Write [sy.Normal(0, 1), sy.Normal(0, 10)].",
            )
        object.__setattr__(self, "components", tuple(self.components))
        for index, component in enumerate(self.components):
            if not isinstance(component, Distribution):
                raise ArgumentTypeError(
                    f"Mixture: components[{index}]",
                    "a distribution",
                    type(component).__name__,
                    "Write for instance sy.Normal(0, 1).",
                )
        kinds = {(c.is_discrete, c.event_axes) for c in self.components}
        if len(kinds) != 1:
            raise ArgumentError(
                "Mixture: components",
                "one or more distributions of one kind",
                ", ".join(str(c) for c in self.components) or "none",
                "Mix continuous with continuous, counts with counts, vectors with vectors.",
            )
        if not isinstance(self.weights, str):
            self._check_weights(np.asarray(self.weights, dtype=np.float64), ArgumentError)

    def _check_weights(self, weights: Array, error: type[ArgumentError | PriorError]) -> None:
        count = len(self.components)
        if weights.ndim < 1 or weights.shape[-1] != count:
            kind = ArgumentError if error is ArgumentError else ShapeError
            raise kind(
                "Mixture: weights",
                f"{count} weights along the last axis, one a component",
                f"shape {weights.shape}",
                "Give as many weights as components.",
            )
        off = np.abs(weights.sum(axis=-1) - 1)
        if np.any(off > _SLACK):
            raise error(
                "Mixture: weights",
                "weights with a sum of one",
                f"a sum that is off by {float(off.max()):g}",
                "Divide them by their sum.",
            )

    def _completed(self, shape: tuple[int, ...], hyper: Resolved) -> Resolved:
        if isinstance(self.weights, str):
            self._check_weights(hyper[-1], PriorError)
        return hyper

    @property
    def parts(self) -> tuple[Distribution, ...]:
        """The components."""
        return self.components

    @property
    def event_axes(self) -> int:
        """Number of last axes of a value that make one vector (1) or matrix (2)."""
        return self.components[0].event_axes

    @property
    def is_discrete(self) -> bool:
        """Whether the distribution is one of whole numbers."""
        return self.components[0].is_discrete

    @property
    def is_proper(self) -> bool:
        """Whether the density integrates to one."""
        return all(component.is_proper for component in self.components)

    def _each(self, hyper: tuple[Any, ...]) -> list[tuple[Any, Resolved, Array]]:
        """Components, their hyperparameters, and their weights."""
        weights = hyper[-1]
        return [(c, hyper[k], np.asarray(weights[..., k])) for k, c in enumerate(self.components)]

    def _stacked(self, logs: list[Array], hyper: tuple[Any, ...]) -> Array:
        """Weighted logs of all components, along a new first axis."""
        weighted = [log + np.log(w) for log, (_, _, w) in zip(logs, self._each(hyper), strict=True)]
        return np.stack(np.broadcast_arrays(*weighted))

    def _log_terms(self, x: Array, hyper: tuple[Any, ...]) -> Array:
        return self._stacked([c._log_density(x, *h) for c, h, _ in self._each(hyper)], hyper)

    def _log_density(self, x: Array, *hyper: Any) -> Array:
        return log_sum(self._log_terms(x, hyper))

    def _shares(self, x: Array, hyper: tuple[Any, ...]) -> Array:
        """Share of each component in the density."""
        terms = self._log_terms(x, hyper)
        return np.exp(terms - log_sum(terms))

    def _gradient(self, x: Array, *hyper: Any) -> Array:
        shares = self._shares(x, hyper)
        each = zip(shares, self._each(hyper), strict=True)
        return sum((_by(share, c._gradient(x, *h)) for share, (c, h, _) in each), np.zeros(()))

    def _slopes(self, x: Array, *hyper: Any) -> dict[str, Array]:
        shares, each = self._shares(x, hyper), self._each(hyper)
        logs = np.broadcast_arrays(*(c._log_density(x, *h) for c, h, _ in each))
        total = self._log_density(x, *hyper)
        slopes = {"weights": np.exp(np.stack(logs, axis=-1) - total[..., None])}
        for k, (c, h, _) in enumerate(each):
            for name, slope in c._slopes(x, *h).items():
                slopes[f"components[{k}].{name}"] = _by(shares[k], slope)
        return slopes

    def _support(self, *hyper: Any) -> tuple[Any, Any]:
        lower, upper = np.asarray(np.inf), np.asarray(-np.inf)
        for c, h, weight in self._each(hyper):
            low, high = c._support(*h)
            held = weight.reshape(weight.shape + (1,) * self.event_axes) > 0
            lower = np.minimum(lower, np.where(held, low, np.inf))
            upper = np.maximum(upper, np.where(held, high, -np.inf))
        return lower, upper

    def _tails(self, *hyper: Any) -> Tails:
        each = [(w, c._tails(*h)) for c, h, w in self._each(hyper)]
        held = [np.reshape(w, np.shape(w) + (1,) * self.event_axes) > 0 for w, _ in each]
        lower = _heaviest([t.lower for _, t in each], held, -1)
        return Tails(lower, _heaviest([t.upper for _, t in each], held, 1))

    def _sample(self, rng: np.random.Generator, shape: tuple[int, ...], *hyper: Any) -> Any:
        total = np.cumsum(hyper[-1], axis=-1)
        batch = shape[: len(shape) - self.event_axes]
        point = rng.random(batch)[..., None] * total[..., -1:]
        chosen = (point >= total[..., :-1]).sum(axis=-1).reshape(batch + (1,) * self.event_axes)
        out = np.zeros(shape)
        for k, (c, h, _) in enumerate(self._each(hyper)):
            out = np.where(chosen == k, c._sample(rng, shape, *h), out)
        return out

    def _log_tails(self, x: Array, *hyper: Any) -> tuple[Array, Array]:
        tails = [log_tails_at(c, x, tuple(h)) for c, h, _ in self._each(hyper)]
        below, above = ([pair[side] for pair in tails] for side in (0, 1))
        return log_sum(self._stacked(below, hyper)), log_sum(self._stacked(above, hyper))

    def _log_mass(self, lower: Array, upper: Array, *hyper: Any) -> Array:
        masses = [c._log_mass(lower, upper, *h) for c, h, _ in self._each(hyper)]
        return log_sum(self._stacked(masses, hyper))

    def _flows(self, x: Array, *hyper: Any) -> dict[str, Array]:
        shares, each = self._shares(x, hyper), self._each(hyper)
        below = np.broadcast_arrays(*(log_tails_at(c, x, tuple(h))[0] for c, h, _ in each))
        total = self._log_density(x, *hyper)
        flows = {"weights": -np.exp(np.stack(below, axis=-1) - total[..., None])}
        for k, (c, h, _) in enumerate(each):
            for name, flow in c._flows(x, *h).items():
                flows[f"components[{k}].{name}"] = _by(shares[k], flow)
        return flows


def _by(share: Array, slope: Array) -> Array:
    """Product that is 0 where the share is; the slope may have axes of its own at the end."""
    share = share.reshape(share.shape + (1,) * max(np.ndim(slope) - share.ndim, 0))
    return np.where(share == 0, 0.0, share * slope)


def _heaviest(tails: list[Tail], held: list[Any], side: int) -> Tail:
    """The heaviest of some tails, elementwise, among those held."""
    best, there = tails[0], held[0]
    for tail, also in zip(tails[1:], held[1:], strict=True):
        better = also & (heavier(tail, best, side) | ~there)
        names = ("limit", "order", "speed", "power")
        best = Tail(*(np.where(better, getattr(tail, n), getattr(best, n)) for n in names))
        there = there | also
    return best
