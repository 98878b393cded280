"""Arrays that users align with the draws: `(n, …)` or `(chain, draw, …)`, never guessed."""

from __future__ import annotations

from typing import Any

import numpy as np
import numpy.typing as npt

from steelyard.arrays import plain_array
from steelyard.base.draws import Array, Draws
from steelyard.errors import ShapeError

__all__ = ["draw_rows", "has_two_axes", "stacked"]


def has_two_axes(shape: tuple[int, ...], draws: Draws, argument: str) -> bool:
    """
    Whether an array of this shape leads with (chain, draw) rather than with the stack.

    Raises
    ------
    ShapeError
        Where neither fits; swapped axes are named.
    """
    lengths = np.diff(draws.starts)
    chains, count = draws.chains, draws.size
    equal = bool((lengths == lengths[0]).all())
    if equal and len(shape) >= 2 and shape[:2] == (chains, int(lengths[0])):
        return True
    if len(shape) >= 1 and shape[0] == count:
        return False
    wanted = f"({count}, …)"
    if equal and (draws.has_chain_axis or chains > 1):
        wanted = f"({chains}, {int(lengths[0])}, …) or {wanted}"
    swapped = equal and chains > 1 and shape[:2] == (int(lengths[0]), chains)
    raise ShapeError(
        argument,
        f"the draws first, shape {wanted}",
        str(shape),
        "Its chain and draw axes look swapped: swap them back."
        if swapped
        else "Use the values that belong to these draws, in their order.",
    )


def stacked(values: Any, draws: Draws, argument: str) -> npt.NDArray[Any]:
    """An array aligned with the draws as `(n, *shape)`, dtype as it came."""
    dims = getattr(values, "dims", None)
    if dims is not None and "draw" in dims:
        lead = ("chain", "draw") if "chain" in dims else ("draw",)
        values = values.transpose(*lead, ...)
    array = plain_array(values, argument)
    if array.size == 0:
        raise ShapeError(argument, "a value for each draw", f"shape {array.shape}", "Pass values.")
    if has_two_axes(array.shape, draws, argument):
        return array.reshape(draws.size, *array.shape[2:])
    return array


def draw_rows(values: Any, draws: Draws, argument: str) -> Array:
    """Log densities aligned with the draws, summed over trailing axes: shape ``(n,)``."""
    array = np.require(stacked(values, draws, argument), np.float64, ["C", "A"])
    return np.asarray(array.reshape(draws.size, -1).sum(axis=1)) if array.ndim > 1 else array
