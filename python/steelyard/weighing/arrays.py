"""The door of `steelyard.weights`: arrays of any shape become columns of draws and back."""

from __future__ import annotations

from collections.abc import Callable, Iterator
from dataclasses import dataclass
from typing import Any

import numpy as np
import numpy.typing as npt

from steelyard.arrays import plain_array
from steelyard.errors import ArgumentError, ArgumentTypeError, RatioError, ShapeError

__all__ = ["Array", "Axis", "Columns", "columns_of", "refuse_bad_log_weights", "seed_key"]

Array = npt.NDArray[np.float64]
Axis = int | tuple[int, ...] | None

# Columns converted to float64 at a time: bounds the copy of a float32 array.
_BLOCK_VALUES = 1 << 21


@dataclass(frozen=True)
class Columns:
    """An array seen as `(draws, columns)`, and how to put results back."""

    values: npt.NDArray[Any]
    kept_shape: tuple[int, ...]
    drawn_shape: tuple[int, ...]
    axes: tuple[int, ...]

    @property
    def count(self) -> int:
        return int(self.values.shape[1])

    def blocks(self) -> Iterator[tuple[slice, Array]]:
        """Float64 blocks of columns; the array itself where it is float64 already."""
        values = self.values
        if values.dtype == np.float64 and values.flags.aligned and values.dtype.isnative:
            yield slice(0, self.count), values
            return
        width = max(1, _BLOCK_VALUES // max(1, values.shape[0]))
        for start in range(0, self.count, width):
            part = slice(start, min(start + width, self.count))
            yield part, np.require(values[:, part], np.float64, ["A"])

    def reduce(self, kernel: Callable[[Array], Array]) -> Any:
        """One number a column, in the shape of the axes that are left; a float for none."""
        out = np.empty(self.count)
        for part, block in self.blocks():
            out[part] = kernel(block)
        return self.reduce_given(out)

    def reduce_given(self, out: Array) -> Any:
        """One number a column, given, in the shape of the axes that are left."""
        return out.reshape(self.kept_shape) if self.kept_shape else float(out[0])

    def restore(self, columns: Array) -> Array:
        """`(draws, columns)` in the shape of the input."""
        shaped = columns.reshape((*self.drawn_shape, *self.kept_shape))
        return np.moveaxis(shaped, range(len(self.axes)), self.axes)


def columns_of(x: npt.ArrayLike, axis: Axis, argument: str = "x") -> Columns:
    """See an array as columns of draws along `axis`."""
    array = plain_array(x, argument, "fiu")
    if array.ndim == 0:
        raise ShapeError(argument, "an array of draws", "a single number", "Pass all draws.")
    axes = _axes(axis, array.ndim)
    drawn = tuple(array.shape[a] for a in axes)
    kept = tuple(s for a, s in enumerate(array.shape) if a not in axes)
    if 0 in drawn:
        raise ShapeError(
            argument, "at least one draw along axis", f"shape {array.shape}", "Pass the draws."
        )
    moved = np.moveaxis(array, axes, range(len(axes)))
    flat = moved.reshape(int(np.prod(drawn)), int(np.prod(kept, dtype=np.int64)))
    return Columns(flat, kept, drawn, axes)


def _axes(axis: Axis, ndim: int) -> tuple[int, ...]:
    if axis is None:
        if ndim == 1:
            return (0,)
        raise ArgumentError(
            "axis",
            f"the axis or axes of the draws, for an array of {ndim} axes",
            "none",
            "Write axis=0, or axis=(0, 1) for (chain, draw, …).",
        )
    axes = tuple(axis) if isinstance(axis, tuple) else (axis,)
    for a in axes:
        if not isinstance(a, int | np.integer) or isinstance(a, bool) or not -ndim <= a < ndim:
            raise ArgumentError(
                "axis", f"integers from {-ndim} to {ndim - 1}", repr(axis), "Name axes it has."
            )
    positive = tuple(int(a) % ndim for a in axes)
    if len(set(positive)) < len(positive) or not positive:
        raise ArgumentError("axis", "each axis once", repr(axis), "Name each once.")
    return positive


def refuse_bad_log_weights(x: Array, argument: str, *, all_zero_is_error: bool = True) -> None:
    """NaN and +inf are errors; so is a column whose every weight is zero."""
    bad = np.isnan(x) | (x == np.inf)
    if bad.any():
        row, column = (int(i[0]) for i in np.nonzero(bad))
        raise RatioError(
            argument,
            "log weights that are finite or −inf",
            f"{int(bad.sum())} NaN or +inf, first {x[row, column]} at draw {row}"
            + (f", column {column}" if x.shape[1] > 1 else ""),
            "Look at target and base there: +inf says that the base cannot make that draw.",
        )
    if all_zero_is_error:
        empty = (x == -np.inf).all(axis=0)
        if empty.any():
            where = f" in column {int(np.argmax(empty))}" if x.shape[1] > 1 else ""
            raise RatioError(
                argument,
                "a draw with a finite log weight",
                f"−inf for every draw{where}",
                "No draw lies in the target's support: refit, or mend the change.",
            )


def seed_key(rng: Any) -> bytes:
    """
    32 bytes drawn from `rng` (SPEC 7): None, a seed, a generator.

    The caller's generator advances, so that two calls differ and both can be replayed.
    """
    if isinstance(rng, bool | float | str):
        raise ArgumentTypeError(
            "rng", "None, an integer seed or a numpy Generator", repr(rng), "Pass one of those."
        )
    try:
        generator = np.random.default_rng(rng)
    except (TypeError, ValueError) as error:
        raise ArgumentTypeError(
            "rng",
            "None, an integer seed that is not negative, or a numpy Generator",
            repr(rng),
            "Pass one of those.",
        ) from error
    return generator.bytes(32)
