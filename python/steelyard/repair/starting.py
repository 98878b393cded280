"""What a run starts from: draws at hand, or a sampler of the source."""

from __future__ import annotations

from collections.abc import Callable, Iterable
from typing import Any

import numpy as np

from steelyard.arrays import plain_array
from steelyard.base.draws import Array
from steelyard.errors import (
    ArgumentError,
    ArgumentTypeError,
    DrawsError,
    RatioError,
    ShapeError,
)
from steelyard.repair.islands import Islands, spread_start
from steelyard.repair.points import Points, Rows

__all__ = ["read_names", "read_start", "refuse_bad_start", "start_size"]

# Particles where the start is a sampler and nobody says how many.
_SIZE = 4000
# An island of fewer particles than this is resampled from too few to show anything. A waste-free
# run needs as many to begin from: with 3 in each, the reported variance was half the observed one.
_LEAST = 10


def start_size(start: Any, size: Any, islands: int, chain_length: int) -> int:
    """Particles of one island: so many that `size` or all start draws fit in."""
    if size is not None:
        if isinstance(size, bool) or not isinstance(size, int | np.integer):
            raise ArgumentTypeError("size", "an integer", repr(size), "Say how many particles.")
        wanted = int(size)
    else:
        wanted = _SIZE if callable(start) else len(start)
    least = _LEAST * chain_length
    if not least * islands <= wanted <= 2**31:
        raise ArgumentError(
            "size",
            f"from {least * islands:,} particles on, {least} for each of {islands} islands",
            str(wanted),
            "Ask for more particles, or for fewer islands.",
        )
    each = -(-wanted // islands)
    return -(-each // chain_length) * chain_length


def read_start(start: Any) -> Any:
    """Draws ``(n, d)`` as float64, or the sampler as it is."""
    if callable(start):
        return start
    array = plain_array(start, "start", "fiu")
    return _points(array, "start")


def _points(array: Any, argument: str) -> Array:
    if array.ndim != 2 or array.shape[1] == 0:
        raise ShapeError(
            argument,
            "points of shape (n, d)",
            f"shape {array.shape}",
            "Stack chains one after the other; for one parameter write start[:, None].",
        )
    if len(array) == 0:
        raise DrawsError(argument, "at least one point", "none", "Pass the draws.")
    points = np.array(array, dtype=np.float64, order="C")
    bad = ~np.isfinite(points)
    if bad.any():
        row, column = (int(i[0]) for i in np.nonzero(bad))
        raise DrawsError(
            argument,
            "finite points",
            f"{points[row, column]} at point {row}, column {column} ({int(bad.sum())} in all)",
            "Leave such draws out before, knowingly.",
        )
    return points


def read_names(names: Any, dimension: int) -> tuple[str, ...] | None:
    """One name a column, or None."""
    if names is None:
        return None
    if isinstance(names, str) or not isinstance(names, Iterable):
        raise ArgumentTypeError("names", "one text a column", repr(names), "Pass a list of texts.")
    found = tuple(names)
    if not all(isinstance(name, str) and name for name in found):
        raise ArgumentTypeError("names", "non-empty texts", repr(found), "Rename the columns.")
    if len(found) != dimension or len(set(found)) < len(found):
        raise ArgumentError(
            "names", f"{dimension} different names", repr(found)[:120], "Name each column once."
        )
    return found


def place_start(
    start: Any, log_weights: Any, islands: Islands, generator: np.random.Generator
) -> tuple[Array, Array, Rows]:
    """Particles ``(n, d)``, their log weights, and which start draw each is."""
    if callable(start):
        if log_weights is not None:
            raise ArgumentError(
                "start_log_weights",
                "none, where the start is a sampler",
                "weights",
                "Pass the draws themselves with their weights.",
            )
        x = _sampled(start, islands.particles, generator)
        count = len(x)
        return x, np.full(count, -np.log(count)), np.arange(count, dtype=np.int64)
    weights = None if log_weights is None else _weights(log_weights, len(start))
    if len(start) < 2 * islands.count:
        raise DrawsError(
            "start",
            f"at least {2 * islands.count} draws, two for each of {islands.count} islands",
            str(len(start)),
            "Bring more draws, or pass a sampler of the source.",
        )
    rows, logs = spread_start(len(start), weights, islands, generator)
    return start[rows], logs, rows


def _sampled(
    start: Callable[[int, np.random.Generator], Any], size: int, generator: np.random.Generator
) -> Array:
    x = _points(plain_array(start(size, generator), "start(size, rng)", "fiu"), "start(size, rng)")
    if len(x) != size:
        raise ShapeError(
            "start(size, rng)", f"{size} points", f"{len(x)}", "Return as many as are asked for."
        )
    return x


def _weights(log_weights: Any, count: int) -> Array:
    array = np.array(plain_array(log_weights, "start_log_weights", "fiu"), dtype=np.float64)
    if array.shape != (count,):
        raise ShapeError(
            "start_log_weights",
            f"shape ({count},), one number a start draw",
            f"shape {array.shape}",
            "Pass one log weight for each row of start.",
        )
    bad = np.isnan(array) | (array == np.inf)
    if bad.any() or not np.isfinite(array).any():
        came = f"{array[np.argmax(bad)]} at {int(np.argmax(bad))}" if bad.any() else "−inf alone"
        raise RatioError(
            "start_log_weights",
            "log weights that are finite or −inf, some finite",
            came,
            "Look at how they were made.",
        )
    return np.asarray(array - array.max())


def refuse_bad_start(points: Points, log_weights: Array) -> None:
    """Start draws without density under the source, or all with weight without under the target."""
    outside = points.source == -np.inf
    if outside.any():
        first = int(np.argmax(outside))
        raise DrawsError(
            "start",
            "draws of the source",
            f"{int(outside.sum())} of {len(outside)} points where source is −inf, the first at "
            f"{points.x[first, :8]}",
            "Pass the density that the draws came from, in the same parameterisation; leave out "
            "draws of no weight that lie elsewhere.",
        )
    if not ((points.target > -np.inf) & (log_weights > -np.inf)).any():
        raise RatioError(
            "target",
            "a positive density at one start point with weight at least",
            "−inf at every start point that has some",
            "Start from draws that overlap the target's support, or mend target.",
        )
