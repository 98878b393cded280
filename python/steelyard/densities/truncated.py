"""A distribution between two limits."""

from __future__ import annotations

import math
from dataclasses import dataclass
from typing import Any, ClassVar

import numpy as np

from steelyard.densities.cumulative import Cumulative
from steelyard.densities.distribution import Distribution
from steelyard.densities.hyperparameters import Array, Hyperparameter
from steelyard.densities.inversion import sample_between
from steelyard.densities.limits import refuse_draws_out_of_order, refuse_out_of_order
from steelyard.densities.record import Resolved
from steelyard.densities.tails import Tail, Tails, bounded
from steelyard.errors import ArgumentError, ArgumentTypeError

__all__ = ["Truncated"]


@dataclass(frozen=True, repr=False)
class Truncated(Cumulative):
    """
    A distribution of single numbers cut off at two limits.

    Parameters
    ----------
    d : Distribution
        What is truncated; its hyperparameters may be names.
    lower : float, array_like or str, optional
        Lower limit, −inf for none.
    upper : float, array_like or str, optional
        Upper limit, +inf for none. Both limits belong to the support.

    Raises
    ------
    ArgumentTypeError
        Where `d` is not a distribution.
    ArgumentError
        For a distribution of vectors or matrices, limits in the wrong order, and limits that hold
        no mass.

    Notes
    -----
    ``log p(x) = log p_d(x) − log P_d(lower ≤ X ≤ upper)``. The mass, and its derivatives, are taken
    in the tail where they lose no digits, and between close limits from the density itself. Named
    limits and hyperparameters keep their part in the mass, draw by draw.

    Examples
    --------
    >>> import steelyard as sy
    >>> float(sy.Truncated(sy.Normal(0, 1), lower=0).log_density(0.0).round(6))
    -0.225791
    """

    d: Distribution
    lower: Hyperparameter = -math.inf
    upper: Hyperparameter = math.inf
    domains: ClassVar = {"d": "distribution", "lower": "limit", "upper": "limit"}

    def _check(self) -> None:
        if not isinstance(self.d, Distribution):
            raise ArgumentTypeError(
                "Truncated: d", "a distribution", type(self.d).__name__, "Write sy.Normal(0, 1)."
            )
        if not isinstance(self.d, Cumulative) or self.d.event_axes:
            raise ArgumentError(
                "Truncated: d",
                "a distribution of single numbers",
                str(self.d),
                "State the joint density as a callable, with its own constant.",
            )
        if not (self.is_discrete and self.lower == self.upper):
            refuse_out_of_order("Truncated", self.lower, self.upper)
        if self.names:
            return
        inner, lower, upper = self.resolve(())
        with np.errstate(all="ignore"):
            if np.any(self.d._log_mass(lower, upper, *inner) == -np.inf):
                raise ArgumentError(
                    "Truncated: upper",
                    f"limits that hold some of the mass of {self.d}",
                    f"lower={self.lower}, upper={self.upper}",
                    "Move a limit into the support.",
                )

    def _completed(self, shape: tuple[int, ...], hyper: Resolved) -> Resolved:
        if self.names and not self.is_discrete:
            refuse_draws_out_of_order("Truncated", hyper[1], hyper[2])
        return hyper

    @property
    def parts(self) -> tuple[Distribution, ...]:
        """The distribution that is truncated."""
        return (self.d,)

    @property
    def is_discrete(self) -> bool:
        """Whether the distribution is one of whole numbers."""
        return self.d.is_discrete

    @property
    def is_proper(self) -> bool:
        """Whether the density integrates to one."""
        if self.d.is_proper or self.names:
            return True
        return bool(np.all(np.isfinite(self.support())))

    @property
    def _inner(self) -> Cumulative:
        assert isinstance(self.d, Cumulative)  # checked when made
        return self.d

    def _constant(self, inner: Resolved, lower: Array, upper: Array) -> Array:
        """Log mass between the limits; 0 for an improper density, which stays one."""
        mass = self._inner._log_mass(lower, upper, *inner)
        return np.where(mass == np.inf, 0.0, mass)

    def _log_density(self, x: Array, *hyper: Any) -> Array:
        inner, lower, upper = hyper
        whole = self.d._log_density(x, *inner)
        possible = (x >= lower) & (x <= upper) & (whole > -np.inf)
        cut = np.where(possible, whole - self._constant(inner, lower, upper), -np.inf)
        return np.where(np.isnan(x), np.nan, cut)

    def _gradient(self, x: Array, *hyper: Any) -> Array:
        return self.d._gradient(x, *hyper[0])

    def _slopes(self, x: Array, *hyper: Any) -> dict[str, Array]:
        inner, lower, upper = hyper
        whole = self.d._slopes(x, *inner)
        growth, limits = self._growth(inner, lower, upper)
        slopes = {f"d.{name}": slope - growth[name] for name, slope in whole.items()}
        return slopes | {name: -value for name, value in limits.items()}

    def _growth(
        self, inner: Resolved, lower: Array, upper: Array
    ) -> tuple[dict[str, Array], dict[str, Array]]:
        """Derivatives of the log mass, in the hyperparameters of `d` and in the limits."""
        constant = self._constant(inner, lower, upper)
        ends = self._inner._ends(lower, upper)
        (at_low, flow_low), (at_high, flow_high) = (self._flow(v, inner, constant) for v in ends)
        growth = {
            name: _by(at_low, flow) - _by(at_high, flow_high[name])
            for name, flow in flow_low.items()
        }
        # Between whole numbers a limit can move without effect.
        still = 0.0 if self.is_discrete else 1.0
        return growth, {"lower": -still * at_low, "upper": still * at_high}

    def _flow(self, x: Array, inner: Resolved, constant: Array) -> tuple[Array, dict[str, Array]]:
        """Density over the mass, and flows, at a limit; density 0 where the limit cuts nothing."""
        low, high = self.d._support(*inner)
        inside = ((x >= low) if self.is_discrete else (x > low)) & (x < high)
        density = np.exp(self.d._log_density(x, *inner) - constant)
        return np.where(inside, density, 0.0), self._inner._flows(x, *inner)

    def _support(self, *hyper: Any) -> tuple[Any, Any]:
        inner, lower, upper = hyper
        if self.is_discrete:
            lower, upper = np.ceil(lower), np.floor(upper)
        low, high = self.d._support(*inner)
        return np.maximum(low, lower), np.minimum(high, upper)

    def _tails(self, *hyper: Any) -> Tails:
        low, high = self._support(*hyper)
        tails = self.d._tails(*hyper[0])
        return Tails(_cut(tails.lower, low), _cut(tails.upper, high))

    def _sample(self, rng: np.random.Generator, shape: tuple[int, ...], *hyper: Any) -> Any:
        inner, lower, upper = hyper
        return sample_between(self._inner, rng, shape, lower, upper, inner)

    def _log_tails(self, x: Array, *hyper: Any) -> tuple[Array, Array]:
        inner, lower, upper = hyper
        constant = self._constant(inner, lower, upper)
        beyond = np.floor(x) + 1 if self.is_discrete else x
        below = self._inner._log_mass(lower, x, *inner) - constant
        return below, self._inner._log_mass(beyond, upper, *inner) - constant

    def _log_mass(self, lower: Array, upper: Array, *hyper: Any) -> Array:
        inner, low, high = hyper
        both = self._inner._log_mass(np.maximum(lower, low), np.minimum(upper, high), *inner)
        return both - self._constant(inner, low, high)

    def _flows(self, x: Array, *hyper: Any) -> dict[str, Array]:
        # P = (F(x) − F(l))/Z, differentiated: the flow at x, less that at l, plus the growth of Z.
        inner, lower, upper = hyper
        constant = self._constant(inner, lower, upper)
        growth, limits = self._growth(inner, lower, upper)
        at_low, flow_low = self._flow(self._inner._ends(lower, upper)[0], inner, constant)
        below, above = (np.exp(v) for v in self._log_tails(x, *hyper))
        by_density = np.exp(constant - self.d._log_density(x, *inner))
        flows = {}
        for name, flow in self._inner._flows(x, *inner).items():
            moved = _by(below, growth[name]) - _by(at_low, flow_low[name])
            flows[f"d.{name}"] = flow + _by(by_density, moved)
        return flows | {
            "lower": -above * limits["lower"] * by_density,
            "upper": below * limits["upper"] * by_density,
        }


def _by(factor: Array, flow: Array) -> Array:
    """Product that is 0 where the factor is; the flow may have axes of its own at the end."""
    factor = np.asarray(factor)
    factor = factor.reshape(factor.shape + (1,) * max(np.ndim(flow) - factor.ndim, 0))
    return np.where(factor == 0, 0.0, factor * flow)


def _cut(tail: Tail, limit: Array) -> Tail:
    """The tail of `d` where the limit does not cut it, else a step."""
    step = bounded(limit)
    cut = step.limit != tail.limit
    names = ("limit", "order", "speed", "power")
    return Tail(*(np.where(cut, getattr(step, n), getattr(tail, n)) for n in names))
