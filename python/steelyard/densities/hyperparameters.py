"""Hyperparameters: numbers, nested tuples of numbers, or names of parameters."""

from __future__ import annotations

import math
from collections.abc import Callable, Mapping
from typing import Any

import numpy as np
import numpy.typing as npt

from steelyard.errors import ArgumentError, ArgumentTypeError, PriorError, ShapeError

__all__ = [
    "Array",
    "Hyperparameter",
    "LookUp",
    "align",
    "check_domain",
    "check_draws",
    "code",
    "freeze",
    "is_inside",
    "named_draws",
    "text",
]

Array = npt.NDArray[np.float64]
# A number, nested tuples of numbers, or the name of a parameter.
Hyperparameter = Any
LookUp = Callable[[str], Array]

_DOMAINS: Mapping[str, tuple[str, Callable[[Array], npt.NDArray[np.bool_]]]] = {
    "real": ("a finite number", np.isfinite),
    "positive": ("a positive finite number", lambda v: np.isfinite(v) & (v > 0)),
    "limit": ("a number, or an infinite limit", lambda v: ~np.isnan(v)),
    "share": ("a number from 0 to 1", lambda v: (v >= 0) & (v <= 1)),
    "count": (
        "a whole number, 0 or above",
        lambda v: np.isfinite(v) & (v >= 0) & (v == np.floor(v)),
    ),
}


def freeze(value: Any, argument: str) -> Any:
    """A hyperparameter as it is kept: a float, nested tuples of floats, or a text."""
    if isinstance(value, str):
        return value
    try:
        array = np.asarray(value)
    except ValueError as error:
        raise ShapeError(
            argument,
            "a number or an array whose rows are of one length",
            f"a ragged {type(value).__name__}",
            "Give as many numbers in every row.",
        ) from error
    if array.dtype.kind not in "fiu":
        raise ArgumentTypeError(
            argument,
            "a number, an array of numbers, or the name of a parameter",
            f"{type(value).__name__} of dtype {array.dtype}" if array.ndim else repr(value),
            "Convert it, or pass a callable as the prior term.",
        )

    if array.size == 0:
        raise ShapeError(
            argument, "at least one number", f"shape {array.shape}", "Give numbers, or one number."
        )

    def deep(item: Any) -> Any:
        return tuple(deep(v) for v in item) if isinstance(item, list) else float(item)

    return deep(array.tolist())


def is_inside(domain: str, value: float) -> bool:
    """Whether one number is known to be in a hyperparameter's range, without arrays."""
    if domain == "real":
        return math.isfinite(value)
    return domain == "positive" and 0 < value < math.inf


def check_domain(domain: str, values: Array, argument: str) -> None:
    """Refuse numbers outside a hyperparameter's range."""
    wanted, inside = _DOMAINS[domain]
    bad = ~inside(values)
    if not np.any(bad):
        return
    first = np.asarray(values)[bad].flat[0]
    raise ArgumentError(
        argument,
        wanted,
        f"{first:g}" + (f" ({int(bad.sum())} such values)" if bad.size > 1 else ""),
        "Give a value from that range.",
    )


def check_draws(domain: str, parameter: str, values: Array, argument: str) -> None:
    """Refuse draws of a parameter that leave the range of the hyperparameter it stands for."""
    wanted, inside = _DOMAINS[domain]
    bad = ~inside(values)
    if not np.any(bad):
        return
    first = int(np.flatnonzero(bad.reshape(len(values), -1).any(axis=1))[0])
    raise PriorError(
        argument,
        f"draws of {parameter!r} that are each {wanted}",
        f"{int(bad.sum())} that are not, first at draw {first}",
        "The base prior is not the one the draws came from, or another parameter is meant.",
    )


def named_draws(
    name: str, draws: Mapping[str, Array] | None, look_up: LookUp | None, argument: str
) -> Array:
    """Draws of the parameter that stands for a hyperparameter."""
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


def align(values: Array, shape: tuple[int, ...], own: int, argument: str) -> Array:
    """
    Insert axes after the draw axis so that ``(n, *h)`` broadcasts against ``(n, *shape)``.

    The last `own` axes are the hyperparameter's own (a vector, a matrix) and stay last.
    """
    kept = values.ndim - own
    if kept < min(1, len(shape)) or kept > len(shape) or (shape and len(values) != shape[0]):
        raise ShapeError(
            argument,
            f"draws that broadcast against a parameter of shape {shape}"
            + (f", with {own} own axes last" if own else ""),
            str(values.shape),
            'Name an element ("tau[0]") or pass a callable as the prior term.',
        )
    middle = (1,) * (len(shape) - kept)
    return values.reshape(values.shape[:1] + middle + values.shape[1:])


def text(value: Any) -> str:
    """A hyperparameter for people: names bare, numbers with all their digits and no more."""
    if isinstance(value, tuple):
        return "[" + ", ".join(text(v) for v in value) + "]"
    if isinstance(value, float):
        short = repr(value)
        return short[:-2] if short.endswith(".0") else short
    return str(value)


def code(value: Any) -> str:
    """A hyperparameter as Python source; ``inf`` alone would not be a number there."""
    if isinstance(value, tuple):
        inner = ", ".join(code(v) for v in value)
        return f"({inner},)" if len(value) == 1 else f"({inner})"
    if isinstance(value, float) and np.isinf(value):
        return f'float("{value}")'
    return repr(value)
