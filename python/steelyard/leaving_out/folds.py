"""K-fold: labels, random folds, blocks of time and of space."""

from __future__ import annotations

from dataclasses import replace
from typing import Any

import numpy as np
import numpy.typing as npt

from steelyard.arrays import plain_array
from steelyard.base import Base
from steelyard.base.draws import Array
from steelyard.base.likelihood import LoglikTerm
from steelyard.errors import ArgumentError, ArgumentTypeError, ShapeError
from steelyard.leaving_out.grouping import read_groups, refuse_everything, term_of
from steelyard.leaving_out.groups import Groups, Positions
from steelyard.leaving_out.influence import read_quantities
from steelyard.leaving_out.leave_out import leave_out_groups
from steelyard.leaving_out.result import LeaveOut
from steelyard.leaving_out.sampling import generator_of

__all__ = ["k_fold"]

# Distances are found for so many pairs at a time.
_PAIRS = 1 << 22


def k_fold(
    base: Base,
    folds: Any = 10,
    *,
    by: str = "chance",
    places: Any = None,
    apart: float = 0,
    term: str | None = None,
    quantities: Any = None,
    rng: Any = None,
    progress: Any = None,
) -> LeaveOut:
    """Leave out folds; see ``Fit.k_fold``."""
    held = None if quantities is None else read_quantities(base, quantities)
    if isinstance(folds, bool) or not isinstance(folds, int | np.integer):
        if not isinstance(by, str) or by != "chance" or places is not None:
            raise ArgumentError(
                "by", "nothing beside folds that are given", repr(by), "Say one or the other."
            )
        groups = read_groups(base, folds, term)
    else:
        groups = _made(base, term_of(base, term), int(folds), by, places, rng)
    if apart:
        groups = _with_neighbours(groups, by, places, apart)
        refuse_everything(base, groups)
    return leave_out_groups(base, groups, held, progress)


def _made(base: Base, term: LoglikTerm, folds: int, by: str, places: Any, rng: Any) -> Groups:
    count = term.observations
    if not 2 <= folds <= count:
        raise ArgumentError(
            "folds", f"from 2 to {count}, the observations", str(folds), "Name fewer folds."
        )
    if by not in ("chance", "order", "place"):
        raise ArgumentError("by", "'chance', 'order' or 'place'", repr(by), "Choose one of them.")
    if (places is not None) != (by == "place"):
        raise ArgumentError(
            "places",
            "coordinates with by='place', and only then",
            "none" if places is None else f"some, with by={by!r}",
            "Pass both or neither.",
        )
    if by == "place":
        members = _cells(_coordinates(places, term), folds)
    else:
        order = np.arange(count)
        if by == "chance":
            order = generator_of(rng).permutation(count)
        members = [np.sort(part) for part in np.array_split(order, folds)]
    lists = tuple(np.asarray(m, dtype=np.int64) for m in members)
    return Groups(term, (folds,), ("fold",), {"fold": np.arange(folds)}, lists)


def _coordinates(places: Any, term: LoglikTerm) -> Array:
    array = plain_array(places, "places", "fiu").astype(np.float64)
    if array.shape == term.obs_shape:
        array = array[..., None]
    if array.shape[:-1] != term.obs_shape:
        raise ShapeError(
            "places",
            f"coordinates of each observation, shape {(*term.obs_shape, 'd')}",
            str(array.shape),
            "Give one row of coordinates an observation.",
        )
    if not np.isfinite(array).all():
        raise ArgumentError("places", "finite coordinates", "NaN or infinite", "Fill them in.")
    return array.reshape(term.observations, -1)


def _cells(places: Array, folds: int) -> list[Positions]:
    """Cells of about equal count: the widest side is cut again and again."""

    def cut(rows: npt.NDArray[np.intp], parts: int) -> list[Positions]:
        if parts == 1:
            return [np.sort(rows).astype(np.int64)]
        axis = int(np.argmax(np.ptp(places[rows], axis=0)))
        ordered = rows[np.argsort(places[rows, axis], kind="stable")]
        first = parts // 2
        at = round(len(rows) * first / parts)
        return cut(ordered[:at], first) + cut(ordered[at:], parts - first)

    return cut(np.arange(len(places)), folds)


def _with_neighbours(groups: Groups, by: str, places: Any, apart: float) -> Groups:
    """
    Folds deleted together with what stands no further from them than `apart`.

    References
    ----------
    .. [1] Burman, Chow, Nolan (1994), Biometrika 81.
    """
    is_number = isinstance(apart, int | float | np.number) and not isinstance(apart, bool)
    if not is_number or not np.isfinite(apart) or apart < 0:
        raise ArgumentTypeError(
            "apart", "a number of at least 0", repr(apart), "Say how many, or how far."
        )
    if by == "chance" or groups.members is None:
        raise ArgumentError(
            "apart", "folds by='order' or by='place'", f"by={by!r}", "Random folds have no border."
        )
    where = (
        np.arange(groups.term.observations, dtype=np.float64)[:, None]
        if by == "order"
        else _coordinates(places, groups.term)
    )
    deleted = tuple(_near(where, members, float(apart)) for members in groups.members)
    return replace(groups, deleted=deleted)


def _near(where: Array, members: Positions, apart: float) -> Positions:
    near = np.zeros(len(where), dtype=np.bool_)
    width = max(1, _PAIRS // len(where))
    for start in range(0, len(members), width):
        part = where[members[start : start + width]]
        square = ((where[:, None, :] - part[None, :, :]) ** 2).sum(axis=2)
        near |= (square <= apart**2).any(axis=1)
    near[members] = True
    return np.flatnonzero(near).astype(np.int64)
