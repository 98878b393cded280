"""What every distribution is: a frozen record of hyperparameters with a log density."""

from __future__ import annotations

import math
from abc import ABC, abstractmethod
from collections.abc import Callable, Mapping
from dataclasses import dataclass, fields
from typing import Any, ClassVar

import numpy as np
import numpy.typing as npt

from steelyard.errors import ArgumentError, ArgumentTypeError, PriorError, ShapeError

__all__ = ["Array", "Distribution", "Hyperparameter"]

Array = npt.NDArray[np.float64]
# A number, nested tuples of numbers, or the name of a parameter.
Hyperparameter = Any

_DOMAINS: Mapping[str, tuple[str, Callable[[Array], npt.NDArray[np.bool_]]]] = {
    "real": ("a finite number", np.isfinite),
    "positive": ("a positive finite number", lambda v: np.isfinite(v) & (v > 0)),
    "limit": ("a number, or an infinite limit", lambda v: ~np.isnan(v)),
}


@dataclass(frozen=True)
class Distribution(ABC):
    """
    Base of all distributions.

    A hyperparameter is a number, an array (kept as nested tuples, so that the distribution can be
    hashed and compared) or the name of a parameter, whose draws then stand for it.
    """

    # Domain of each hyperparameter, in the constructor's order.
    domains: ClassVar[Mapping[str, str]]

    def __post_init__(self) -> None:
        for name in self.domains:
            value = _frozen_value(getattr(self, name), f"{type(self).__name__}: {name}")
            object.__setattr__(self, name, value)
            if not isinstance(value, str):
                self._check(name, np.asarray(value, dtype=np.float64))

    def _check(self, name: str, values: Array) -> None:
        wanted, inside = _DOMAINS[self.domains[name]]
        bad = ~inside(values)
        if not np.any(bad):
            return
        first = np.asarray(values)[bad].flat[0]
        raise ArgumentError(
            f"{type(self).__name__}: {name}",
            wanted,
            f"{first:g}" + (f" ({int(bad.sum())} such values)" if bad.size > 1 else ""),
            "Give a value from that range.",
        )

    @property
    def names(self) -> tuple[str, ...]:
        """Parameters that stand for a hyperparameter."""
        values = (getattr(self, name) for name in self.domains)
        return tuple(v for v in values if isinstance(v, str))

    @property
    def is_proper(self) -> bool:
        """Whether the density integrates to one."""
        return True

    def resolve(
        self,
        shape: tuple[int, ...],
        draws: Mapping[str, Array] | None = None,
        look_up: Callable[[str], Array] | None = None,
    ) -> list[Array]:
        """Hyperparameters as arrays that broadcast against a value of shape `shape`."""
        out = []
        for name in self.domains:
            value = getattr(self, name)
            if isinstance(value, str):
                found = _named(value, draws, look_up, f"{type(self).__name__}: {name}")
                self._check_draws(name, value, found)
                out.append(_align(found, shape, f"{type(self).__name__}: {name}={value!r}"))
            else:
                out.append(np.asarray(value, dtype=np.float64))
        try:
            np.broadcast_shapes(shape, *(v.shape for v in out))
        except ValueError as error:
            raise ShapeError(
                str(self),
                f"hyperparameters that broadcast against the value's shape {shape}",
                ", ".join(str(v.shape) for v in out),
                "Give scalars or arrays of the parameter's own trailing shape.",
            ) from error
        return out

    def _check_draws(self, name: str, parameter: str, values: Array) -> None:
        wanted, inside = _DOMAINS[self.domains[name]]
        bad = ~inside(values)
        if np.any(bad):
            first = int(np.flatnonzero(bad.reshape(len(values), -1).any(axis=1))[0])
            raise PriorError(
                f"{type(self).__name__}: {name}",
                f"draws of {parameter!r} that are each {wanted}",
                f"{int(bad.sum())} that are not, first at draw {first}",
                "The base prior is not the one the draws came from, or another parameter is meant.",
            )

    def log_density(
        self,
        value: npt.ArrayLike,
        draws: Mapping[str, Array] | None = None,
        look_up: Callable[[str], Array] | None = None,
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
            Log densities, shape of `value`.

        Raises
        ------
        PriorError
            Where a named hyperparameter is missing or leaves its range.
        ShapeError
            Where hyperparameters do not broadcast against `value`.
        """
        x = np.asarray(value, dtype=np.float64)
        hyper = self.resolve(x.shape, draws, look_up)
        with np.errstate(divide="ignore", invalid="ignore", over="ignore"):
            out = self._log_density(x, *hyper)
        lower, upper = self._support(*hyper)
        outside = ~((x >= lower) & (x <= upper))
        out = np.where(outside, -np.inf, out)
        return np.where(np.isnan(x), np.nan, out)

    def support(
        self,
        shape: tuple[int, ...] = (),
        draws: Mapping[str, Array] | None = None,
        look_up: Callable[[str], Array] | None = None,
    ) -> tuple[Array, Array]:
        """Lower and upper limit of the support, as arrays that broadcast against `shape`."""
        lower, upper = self._support(*self.resolve(shape, draws, look_up))
        return np.asarray(lower, dtype=np.float64), np.asarray(upper, dtype=np.float64)

    @abstractmethod
    def _log_density(self, x: Array, *hyper: Array) -> Array: ...

    def _support(self, *hyper: Array) -> tuple[Any, Any]:
        return -math.inf, math.inf

    def __str__(self) -> str:
        return f"{type(self).__name__}({', '.join(_text(v) for v in self._values())})"

    def _values(self) -> list[Any]:
        return [getattr(self, f.name) for f in fields(self)]


def _text(value: Any) -> str:
    if isinstance(value, str):
        return value
    if isinstance(value, tuple):
        return "[" + ", ".join(_text(v) for v in value) + "]"
    return f"{value:g}"


def _frozen_value(value: Any, argument: str) -> Any:
    if isinstance(value, str):
        return value
    array = np.asarray(value)
    if array.dtype.kind not in "fiu" or isinstance(value, bool):
        raise ArgumentTypeError(
            argument,
            "a number, an array of numbers, or the name of a parameter",
            f"{type(value).__name__} of dtype {array.dtype}" if array.ndim else repr(value),
            "Convert it, or pass a callable as the prior term.",
        )

    def freeze(item: Any) -> Any:
        return tuple(freeze(v) for v in item) if isinstance(item, list) else float(item)

    return freeze(array.tolist())


def _named(
    name: str,
    draws: Mapping[str, Array] | None,
    look_up: Callable[[str], Array] | None,
    argument: str,
) -> Array:
    if look_up is not None:
        return look_up(name)
    if draws is None or name not in draws:
        raise PriorError(
            argument,
            f"draws of the parameter {name!r}",
            "none" if draws is None else f"draws of {', '.join(draws)}",
            "Pass draws= with that parameter, or give a number.",
        )
    return np.asarray(draws[name], dtype=np.float64)


def _align(values: Array, shape: tuple[int, ...], argument: str) -> Array:
    """Insert axes after the draw axis so that `(n, *h)` broadcasts against `(n, *shape)`."""
    if values.ndim > len(shape) or (shape and values.shape[0] != shape[0]):
        raise ShapeError(
            argument,
            f"draws that broadcast against a parameter of shape {shape}",
            str(values.shape),
            'Name an element ("tau[0]") or pass a callable as the prior term.',
        )
    middle = (1,) * (len(shape) - values.ndim)
    return values.reshape(values.shape[:1] + middle + values.shape[1:])
