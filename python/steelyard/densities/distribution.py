"""What every distribution is: a frozen record of hyperparameters with a log density."""

from __future__ import annotations

from abc import ABC, abstractmethod
from dataclasses import dataclass
from typing import Any

import numpy as np
import numpy.typing as npt

from steelyard.densities.hyperparameters import Array, Hyperparameter, LookUp
from steelyard.densities.record import Draws, Record, Resolved
from steelyard.densities.tails import Tails
from steelyard.errors import ArgumentError, ShapeError

__all__ = ["Array", "Distribution", "Hyperparameter"]


@dataclass(frozen=True, repr=False)
class Distribution(Record, ABC):
    """
    Base of all distributions.

    A hyperparameter is a number, an array (kept as nested tuples, so that the distribution can be
    hashed and compared) or the name of a parameter, whose draws then stand for it. A distribution
    of vectors or matrices acts on the last axes of the value and returns log densities without
    them.
    """

    @property
    def is_discrete(self) -> bool:
        """Whether the distribution is one of whole numbers."""
        return False

    @property
    def is_proper(self) -> bool:
        """Whether the density integrates to one."""
        return True

    def log_density(
        self,
        value: npt.ArrayLike,
        draws: Draws | None = None,
        look_up: LookUp | None = None,
    ) -> Array:
        """
        Natural log density, −inf outside the support.

        Parameters
        ----------
        value : array_like
            Where to evaluate, shape ``(n, *shape)`` or any shape without named hyperparameters.
        draws : mapping of str to numpy.ndarray, optional
            Draws ``(n, *shape)`` of the parameters that stand for hyperparameters.
        look_up : callable, optional
            Finds the draws of a name; used in place of `draws` where elements may be named.

        Returns
        -------
        numpy.ndarray
            Log densities, shape of `value` (without its last axes for vectors and matrices).

        Raises
        ------
        PriorError
            Where a named hyperparameter is missing or leaves its range.
        ShapeError
            Where hyperparameters do not broadcast against `value`.
        """
        x = self._read(value)
        hyper = self.resolve(x.shape, draws, look_up)
        with _quiet():
            return self._log_density(x, *hyper)

    def gradient(
        self,
        value: npt.ArrayLike,
        draws: Draws | None = None,
        look_up: LookUp | None = None,
    ) -> Array:
        """
        Derivative of the log density in the value.

        Parameters
        ----------
        value, draws, look_up : array_like, mapping, callable
            As for `log_density`.

        Returns
        -------
        numpy.ndarray
            Shape of `value`; NaN outside the support. Entries of vectors and matrices count as
            free, whatever ties them together.

        Raises
        ------
        ArgumentError
            For a discrete distribution.
        PriorError, ShapeError
            As `log_density`.
        """
        if self.is_discrete:
            raise ArgumentError(
                "gradient", "a continuous distribution", str(self), "Use differences instead."
            )
        x = self._read(value)
        hyper = self.resolve(x.shape, draws, look_up)
        with _quiet():
            return self._inside(x, self._gradient(x, *hyper), hyper, self.event_axes)

    def hyper_gradient(
        self,
        value: npt.ArrayLike,
        draws: Draws | None = None,
        look_up: LookUp | None = None,
    ) -> dict[str, Array]:
        """
        Derivative of the log density in each hyperparameter.

        Parameters
        ----------
        value, draws, look_up : array_like, mapping, callable
            As for `log_density`.

        Returns
        -------
        dict of str to numpy.ndarray
            In the constructor's order. Each array has the shape of the log density, and a
            vector's or matrix's own axes after it; NaN outside the support. The derivative in a
            number that several entries share is the sum of theirs. Hyperparameters of parts are
            written as in Python: ``"d.mean"``, ``"components[0].sd"``.

        Raises
        ------
        PriorError, ShapeError
            As `log_density`.
        """
        x = self._read(value)
        hyper = self.resolve(x.shape, draws, look_up)
        with _quiet():
            slopes = self._slopes(x, *hyper)
            batch = x.ndim - self.event_axes
            return {
                name: self._inside(x, slope, hyper, max(np.ndim(slope) - batch, 0))
                for name, slope in slopes.items()
            }

    def _read(self, value: npt.ArrayLike) -> Array:
        x = np.asarray(value, dtype=np.float64)
        self._expect_axes(x.shape, "value")
        return x

    def _expect_axes(self, shape: tuple[int, ...], argument: str) -> None:
        if len(shape) < self.event_axes:
            raise ShapeError(
                argument,
                f"a shape that ends with the {self.event_axes} axes of {self}",
                str(shape),
                "Give whole vectors or matrices.",
            )

    def _inside(self, x: Array, slope: Array, hyper: Resolved, own: int) -> Array:
        """NaN where the density is 0 or the value NaN, in the full shape."""
        outside = ~(self._log_density(x, *hyper) > -np.inf)
        outside = outside.reshape(outside.shape + (1,) * own)
        slope = np.broadcast_to(slope, np.broadcast_shapes(np.shape(slope), outside.shape))
        return np.where(outside, np.nan, slope)

    def support(
        self,
        shape: tuple[int, ...] = (),
        draws: Draws | None = None,
        look_up: LookUp | None = None,
    ) -> tuple[Array, Array]:
        """
        Lower and upper limit of the support of each entry.

        Parameters
        ----------
        shape : tuple of int, optional
            Shape of the value.
        draws, look_up : mapping, callable, optional
            As for `log_density`.

        Returns
        -------
        tuple of numpy.ndarray
            Limits as arrays that broadcast against `shape`.

        Raises
        ------
        PriorError, ShapeError
            As `log_density`.
        """
        lower, upper = self._support(*self.resolve(shape, draws, look_up))
        return np.asarray(lower, dtype=np.float64), np.asarray(upper, dtype=np.float64)

    def tails(
        self,
        shape: tuple[int, ...] = (),
        draws: Draws | None = None,
        look_up: LookUp | None = None,
    ) -> Tails:
        """
        How fast the density falls at both ends; of vectors and matrices, each entry's marginal.

        Parameters
        ----------
        shape : tuple of int, optional
            Shape of the value.
        draws, look_up : mapping, callable, optional
            As for `log_density`.

        Returns
        -------
        Tails
            Lower and upper `Tail`, whose arrays broadcast against `shape`.

        Raises
        ------
        PriorError, ShapeError
            As `log_density`.
        """
        hyper = self.resolve(shape, draws, look_up)
        with _quiet():
            return self._tails(*hyper)

    def sample(
        self,
        size: int | tuple[int, ...] = (),
        *,
        rng: np.random.Generator | int | None = None,
        draws: Draws | None = None,
        look_up: LookUp | None = None,
    ) -> Array:
        """
        Draw random values.

        Parameters
        ----------
        size : int or tuple of int, optional
            Shape of the result, with the own axes of vectors and matrices last, and the number of
            draws first where hyperparameters are named.
        rng : numpy.random.Generator or int, optional
            Random generator or seed.
        draws, look_up : mapping, callable, optional
            As for `log_density`.

        Returns
        -------
        numpy.ndarray
            Independent draws, shape `size`.

        Raises
        ------
        ArgumentError
            For an improper density.
        PriorError, ShapeError
            As `log_density`.
        """
        shape = (size,) if isinstance(size, int | np.integer) else tuple(size)
        self._expect_axes(shape, "size")
        if not self.is_proper:
            raise ArgumentError(
                "sample", "a proper density", str(self), "Give finite limits or another prior."
            )
        hyper = self.resolve(shape, draws, look_up)
        with _quiet():
            return np.asarray(self._sample(np.random.default_rng(rng), shape, *hyper), np.float64)

    @abstractmethod
    def _log_density(self, x: Array, *hyper: Any) -> Array:
        """Log density; −inf outside the support, NaN at NaN."""

    @abstractmethod
    def _gradient(self, x: Array, *hyper: Any) -> Array:
        """Derivative in the value, anything outside the support."""

    @abstractmethod
    def _slopes(self, x: Array, *hyper: Any) -> dict[str, Array]:
        """Derivatives in the hyperparameters, anything outside the support."""

    @abstractmethod
    def _support(self, *hyper: Any) -> tuple[Any, Any]:
        """Lower and upper limit."""

    @abstractmethod
    def _tails(self, *hyper: Any) -> Tails:
        """Both ends."""

    @abstractmethod
    def _sample(self, rng: np.random.Generator, shape: tuple[int, ...], *hyper: Any) -> Any:
        """Independent draws of that shape."""


def _quiet() -> Any:
    return np.errstate(all="ignore")  # infinities and NaN at the edges of a support are meant
