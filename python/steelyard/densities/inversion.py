"""Random numbers between two limits of a distribution."""

from __future__ import annotations

from collections.abc import Callable
from typing import Any

import numpy as np
import numpy.typing as npt

from steelyard.densities.cumulative import Cumulative, log_tails_at
from steelyard.densities.hyperparameters import Array

__all__ = ["sample_between"]

Reached = Callable[[Array], npt.NDArray[np.bool_]]

# Share of the mass from which on drawing again until all draws are inside is the cheaper way.
_LARGE_SHARE = 0.2
# Doublings and halvings that cross the whole range of numbers.
_MOST_STEPS = 2200


def sample_between(
    d: Cumulative,
    rng: np.random.Generator,
    shape: tuple[int, ...],
    lower: Array,
    upper: Array,
    hyper: Any,
) -> Array:
    """Independent draws of `d` from `lower` to `upper`, both included."""
    mass = np.broadcast_to(d._log_mass(lower, upper, *hyper), shape)
    if d.is_proper and np.all(mass > np.log(_LARGE_SHARE)):
        return _drawn_again(d, rng, shape, lower, upper, hyper)
    return _inverted(d, rng, shape, lower, upper, hyper)


def _drawn_again(
    d: Cumulative,
    rng: np.random.Generator,
    shape: tuple[int, ...],
    lower: Array,
    upper: Array,
    hyper: Any,
) -> Array:
    out = np.full(shape, np.nan)
    missing = np.ones(shape, dtype=bool)
    while missing.any():
        values = np.asarray(d._sample(rng, shape, *hyper), dtype=np.float64)
        found = missing & (values >= lower) & (values <= upper)
        out = np.where(found, values, out)
        missing &= ~found
    return out


def _inverted(
    d: Cumulative,
    rng: np.random.Generator,
    shape: tuple[int, ...],
    lower: Array,
    upper: Array,
    hyper: Any,
) -> Array:
    """Values at which the distribution function reaches a uniform share of the mass."""
    low, high = d._ends(lower, upper)
    bottom, top = d._support(*hyper)
    bottom = np.asarray(bottom) - 1 if d.is_discrete else bottom
    low, high = np.broadcast_to(np.maximum(low, bottom), shape), np.minimum(high, top)
    high = np.broadcast_to(high, shape)
    share = rng.random(shape)
    if not d.is_proper:
        target = d._log_mass(lower, upper, *hyper) + np.log(share)
        return _bisected(lambda x: d._log_mass(low, x, *hyper) >= target, low, high, d.is_discrete)
    (below_low, above_low), (below, above) = (log_tails_at(d, v, hyper) for v in (low, high))
    # The target is set in the tail where the numbers are small and differ in their digits.
    in_lower = below < above_low
    target_below = np.logaddexp(below_low + np.log1p(-share), below + np.log(share))
    target_above = np.logaddexp(above_low + np.log1p(-share), above + np.log(share))

    def reached(x: Array) -> npt.NDArray[np.bool_]:
        now_below, now_above = log_tails_at(d, x, hyper)
        return np.where(in_lower, now_below >= target_below, now_above <= target_above)

    return _bisected(reached, *_bracket(reached, low, high), d.is_discrete)


def _bracket(reached: Reached, low: Array, high: Array) -> tuple[Array, Array]:
    """Finite limits around the value that is looked for."""
    start = np.where(np.isfinite(low), low, np.where(np.isfinite(high), high, 0.0))
    step = np.ones_like(start)
    lower = np.where(np.isfinite(low), low, start - step)
    upper = np.where(np.isfinite(high), high, start + step)
    for _ in range(_MOST_STEPS):
        short = np.isinf(high) & ~reached(upper)
        beyond = np.isinf(low) & reached(lower)
        if not (short.any() or beyond.any()):
            break
        step = step * 2
        lower = np.where(short, upper, np.where(beyond, lower - step, lower))
        upper = np.where(short, upper + step, upper)
    return lower, upper


def _bisected(reached: Reached, lower: Array, upper: Array, is_discrete: bool) -> Array:
    """The smallest value that is reached, to the last digits; whole for whole numbers."""
    for _ in range(_MOST_STEPS):
        middle = lower + (upper - lower) / 2
        middle = np.floor(middle) if is_discrete else middle
        if np.all((middle <= lower) | (middle >= upper)):
            break
        hit = reached(middle)
        lower, upper = np.where(hit, lower, middle), np.where(hit, middle, upper)
    return upper
