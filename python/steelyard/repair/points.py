"""Points with both log densities there, and the user's functions that give them."""

from __future__ import annotations

from collections.abc import Callable
from dataclasses import dataclass
from typing import Any

import numpy as np
import numpy.typing as npt

from steelyard.arrays import Frozen, frozen, plain_array
from steelyard.base.draws import Array
from steelyard.errors import ArgumentError, ArgumentTypeError, ShapeError

__all__ = ["Densities", "Points", "Rows", "refuse_no_function"]

Rows = npt.NDArray[np.int64]


@dataclass(frozen=True, eq=False)
class Points(Frozen):
    """
    Points, and what is known of source and target there.

    Attributes
    ----------
    x : numpy.ndarray
        The points, shape ``(n, d)``.
    source, target : numpy.ndarray
        Log densities, shape ``(n,)``; −inf outside of a support.
    source_gradient, target_gradient : numpy.ndarray or None
        Their gradients, shape ``(n, d)``, where a move needs them.
    """

    x: Array
    source: Array
    target: Array
    source_gradient: Array | None = None
    target_gradient: Array | None = None

    @property
    def ratio(self) -> Array:
        """``ℓ = log target − log source``; −inf where the target has no density."""
        with np.errstate(invalid="ignore"):
            return np.where(self.target == -np.inf, -np.inf, self.target - self.source)

    def at(self, temperature: float) -> Array:
        """``(1 − λ) log source + λ log target``; at the ends the other one does not count."""
        if temperature >= 1:
            return self.target
        if temperature <= 0:
            return self.source
        return (1 - temperature) * self.source + temperature * self.target

    def gradient(self, temperature: float) -> Array:
        """Gradient of :meth:`at`."""
        assert self.source_gradient is not None
        assert self.target_gradient is not None
        if temperature >= 1:
            return self.target_gradient
        return (1 - temperature) * self.source_gradient + temperature * self.target_gradient

    def take(self, rows: Rows) -> Points:
        """The points at `rows`."""
        return Points(*(None if part is None else part[rows] for part in self._parts()))  # type: ignore[arg-type]

    def where(self, accepted: npt.NDArray[np.bool_], proposed: Points) -> Points:
        """These points, with the proposed ones in their place where accepted."""

        def chosen(old: Array | None, new: Array | None) -> Array | None:
            if old is None or new is None:
                return None
            return np.where(accepted if old.ndim == 1 else accepted[:, None], new, old)

        parts = zip(self._parts(), proposed._parts(), strict=True)
        return Points(*(chosen(old, new) for old, new in parts))  # type: ignore[arg-type]

    @staticmethod
    def joined(parts: list[Points], order: Rows) -> Points:
        """Points of several batches in one, in the given order."""
        columns = zip(*(part._parts() for part in parts), strict=True)
        return Points(*(None if c[0] is None else np.concatenate(c)[order] for c in columns))  # type: ignore[arg-type]

    def _parts(self) -> tuple[Array | None, ...]:
        return (self.x, self.source, self.target, self.source_gradient, self.target_gradient)


@dataclass(frozen=True, eq=False)
class Densities:
    """The user's functions, called on whole batches and never believed unchecked."""

    source: Callable[[Array], Any] | None
    target: Callable[[Array], Any] | None
    source_gradient: Callable[[Array], Any] | None = None
    target_gradient: Callable[[Array], Any] | None = None

    @property
    def has_gradients(self) -> bool:
        return self.source_gradient is not None and self.target_gradient is not None

    def at(self, x: Array, *, gradients: bool) -> Points:
        """Both log densities at `x` ``(n, d)``, and their gradients where wanted."""
        x = frozen(x)
        source, target = _values(self.source, x, "source"), _values(self.target, x, "target")
        if not gradients:
            return Points(x, source, target)
        return Points(
            x,
            source,
            target,
            _gradients(self.source_gradient, x, source, "source_gradient"),
            _gradients(self.target_gradient, x, target, "target_gradient"),
        )


def _called(
    function: Callable[[Array], Any] | None, x: Array, name: str, shape: tuple[int, ...]
) -> Array:
    if function is None:
        raise ArgumentError(name, "a function", "none", "Pass it again.")
    came = plain_array(function(x), f"{name}(x)", "fiu")
    if came.shape != shape:
        raise ShapeError(
            f"{name}(x)",
            f"shape {shape} for points of shape {x.shape}",
            f"shape {came.shape}",
            "The function gets all points at once: sum over the last axis, not over the points.",
        )
    # A copy: the function may hand out a buffer that it writes to again.
    return np.array(came, dtype=np.float64)


def _values(function: Callable[[Array], Any] | None, x: Array, name: str) -> Array:
    values = _called(function, x, name, (len(x),))
    bad = np.isnan(values) | (values == np.inf)
    if bad.any():
        first = int(np.argmax(bad))
        raise ArgumentError(
            f"{name}(x)",
            "a log density that is finite or −inf",
            f"{values[first]} at {_place(x, first)} ({int(bad.sum())} of {len(x)} points)",
            "Return −inf where there is no density.",
        )
    return values


def _gradients(
    function: Callable[[Array], Any] | None, x: Array, density: Array, name: str
) -> Array:
    values = _called(function, x, name, x.shape)
    inside = density > -np.inf
    bad = ~np.isfinite(values).all(axis=1) & inside
    if bad.any():
        first = int(np.argmax(bad))
        raise ArgumentError(
            f"{name}(x)",
            "finite gradients where the density is positive",
            f"{values[first]} at {_place(x, first)} ({int(bad.sum())} of {len(x)} points)",
            "Mend the gradient there, or choose a move without one.",
        )
    # Outside of the support a proposal is refused whatever its gradient.
    return np.where(inside[:, None], values, 0.0)


def _place(x: Array, row: int) -> str:
    shown = ", ".join(f"{value:.6g}" for value in x[row, :8])
    return f"point {row}, x = [{shown}{', …' if x.shape[1] > 8 else ''}]"


def refuse_no_function(function: Any, name: str) -> None:
    """An argument that cannot be called is refused."""
    if not callable(function):
        raise ArgumentTypeError(
            name,
            "a function of points (n, d) that returns log densities (n,)",
            f"a {type(function).__name__}",
            "Pass the function itself; a distribution has .log_density.",
        )
