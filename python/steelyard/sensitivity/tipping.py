"""Where a decision flips along a hyperparameter, and how far these draws can tell."""

from __future__ import annotations

import math
from dataclasses import dataclass
from html import escape
from itertools import pairwise
from typing import TYPE_CHECKING, Any, Literal

import numpy as np

from steelyard.answers.estimate import Estimate
from steelyard.arrays import Frozen
from steelyard.base import Base
from steelyard.digits import rounded, short
from steelyard.errors import ArgumentError
from steelyard.sensitivity.crossings import (
    Crossing,
    confidence_set,
    find_crossing,
    flips,
    inside,
    trusted_region,
)
from steelyard.sensitivity.families import Family, first_name, read_family, remembering
from steelyard.sensitivity.nodes import own_weights
from steelyard.sensitivity.path import Path, Place
from steelyard.sensitivity.resistance import read_event, read_level

if TYPE_CHECKING:
    from steelyard.show.sweep_plots import TippingPlots

__all__ = ["TippingPoint", "tipping_point"]

_GRID = 24


@dataclass(frozen=True, eq=False)
class TippingPoint(Frozen):
    """
    Where a decision flips along a hyperparameter.

    Attributes
    ----------
    status : {"flips", "holds", "unknown"}
        Flips inside the trusted region; holds all the way, all of it trusted; or unknown, since
        the trusted region ends before the decision flips.
    at, error : float
        The crossing nearest to the start and its Monte Carlo error ``error(P)/|dP/dλ|``; NaN
        where there is none.
    confidence_set : tuple of (float, float)
        Intervals of values at which the draws do not tell the sides apart at 95 %; an end that
        the trusted region or the search cuts off is infinite.
    trusted_until : (float, float)
        Limits of the trusted region about the start.
    crossings : tuple of Crossing
        All crossings inside the trusted region, nearest first.
    start : float
        Where the search began.
    above : bool
        Whether the probability is above the level at the start.
    probability : Estimate or None
        The probability at the crossing, with its verdict.
    path : tuple of numpy.ndarray
        Values visited, in ascending order, with probability, error and whether it is sound.
    reweighings : int
        How many there were.
    name, event, level : str, str, float
        What was asked.
    """

    status: Literal["flips", "holds", "unknown"]
    at: float
    error: float
    confidence_set: tuple[tuple[float, float], ...]
    trusted_until: tuple[float, float]
    crossings: tuple[Crossing, ...]
    start: float
    above: bool
    probability: Estimate | None
    path: tuple[Any, Any, Any, Any]
    reweighings: int
    name: str
    event: str
    level: float

    @property
    def plot(self) -> TippingPlots:
        """Plot of the path, its level, and where they meet."""
        from steelyard.show.sweep_plots import TippingPlots

        return TippingPlots(self)

    def __str__(self) -> str:
        side = "above" if self.above else "not above"
        head = f"P({self.event}) is {side} {self.level:g} at {self.name} = {short(self.start)}"
        low, high = map(short, self.trusted_until)
        reach = f"these draws can tell from {low} to {high}"
        if self.status == "holds":
            return f"{head} and holds: {reach}"
        if self.status == "unknown":
            return f"{head}; no flip where {reach}, unknown beyond"
        flips = ", ".join(
            f"{rounded(c.at, c.error)} ± {rounded(c.error, c.error)}" for c in self.crossings
        )
        sets = ", ".join(f"[{short(a)}, {short(b)}]" for a, b in self.confidence_set)
        return f"{head} and flips at {self.name} = {flips}; 95 % set {sets}; {reach}"

    def __repr__(self) -> str:
        return f"<TippingPoint {self}>"

    def _repr_html_(self) -> str:
        return f"<p>{escape(str(self))}</p>"


def tipping_point(
    base: Base,
    family: Family,
    event: Any,
    level: float,
    between: tuple[float, float],
    start: float | None = None,
) -> TippingPoint:
    """Where the decision flips; see ``Fit.tipping_point``."""
    read_family(family)
    limits = _read_between(between)
    level = read_level(level)
    mask = read_event(event, base, "A tipping point")
    held = remembering(base)
    own = own_weights(held)
    path = Path(held, family, first_name(family), event, mask, level, limits, own)
    grid = _path_grid(path)
    origin = _read_start(start, limits)
    grid = sorted({*grid, origin}) if origin is not None else grid
    places = path.visit(grid)
    if origin is None:
        # The node nearest to the base is the one whose weights are the most equal.
        origin = max(places, key=lambda p: p.effective_size).at
    return _found(path, origin)


def _read_between(between: Any) -> tuple[float, float]:
    array = np.asarray(between)
    if array.shape != (2,) or array.dtype.kind not in "fiu" or not np.isfinite(array).all():
        raise ArgumentError(
            "between", "two finite numbers (lower, upper)", repr(between), "Say where to look."
        )
    low, high = float(array[0]), float(array[1])
    if not low < high:
        raise ArgumentError(
            "between", "a lower and a higher limit", f"{low:g} and {high:g}", "Swap them."
        )
    return low, high


def _read_start(start: Any, limits: tuple[float, float]) -> float | None:
    if start is None:
        return None
    number = isinstance(start, int | float | np.floating) and not isinstance(start, bool)
    if not number or not limits[0] <= start <= limits[1]:
        raise ArgumentError(
            "start", f"a number from {limits[0]:g} to {limits[1]:g}", repr(start), "Start inside."
        )
    return float(start)


def _path_grid(path: Path) -> list[float]:
    """Values at even steps over the whole range."""
    low, high = (path.step(v) for v in path.between)
    inner = [path.value(s) for s in np.linspace(low, high, _GRID)]
    return [path.between[0], *inner[1:-1], path.between[1]]


def _found(path: Path, origin: float) -> TippingPoint:
    low, high, cut_low, cut_high = trusted_region(path, origin)
    places = inside(path, low, high)
    start = path.places[origin]

    def distance(pair: tuple[Place, Place]) -> float:
        return min(abs(path.step(place.at) - path.step(origin)) for place in pair)

    # The nearest first, while there are reweighings left to place it well.
    pairs = sorted((pair for pair in pairwise(places) if flips(*pair)), key=distance)
    crossings = [find_crossing(path, *pair) for pair in pairs]
    ends = confidence_set(path, low, high) if places else ()
    status: Literal["flips", "holds", "unknown"] = "unknown"
    if crossings:
        status = "flips"
    elif places and not (cut_low or cut_high):
        status = "holds"
    first = crossings[0] if crossings else Crossing(math.nan, math.nan)
    visited = sorted(path.places.values(), key=lambda p: p.at)
    columns = [
        [p.at for p in visited],
        [p.gap + path.level for p in visited],
        [p.error for p in visited],
    ]
    arrays = [np.array(c) for c in columns]
    for array in arrays:
        array.flags.writeable = False
    at_crossing = path.probability(first.at) if crossings else None
    return TippingPoint(
        status,
        first.at,
        first.error,
        ends,
        (low, high),
        tuple(crossings),
        origin,
        start.gap > 0,
        at_crossing,
        (arrays[0], arrays[1], arrays[2], np.array([p.is_sound for p in visited])),
        path.spent,
        path.name,
        path.event.label,
        path.level,
    )
