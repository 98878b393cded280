"""Resampling."""

from __future__ import annotations

from collections.abc import Callable
from typing import Any

import numpy as np
import numpy.typing as npt
from timing import Case

from steelyard import _core

Array = npt.NDArray[np.float64]
Indices = npt.NDArray[np.int64]

KEY = bytes(range(32))


def by_positions(w: Array, positions: Array) -> Indices:
    running = np.cumsum(w)
    return np.searchsorted(running / running[-1], positions)


def residual(w: Array, rng: np.random.Generator) -> Indices:
    size = len(w)
    wanted = size * w / w.sum()
    counts = np.floor(wanted).astype(np.int64)
    rest = by_positions(wanted - counts, rng.random(size - counts.sum()))
    counts += np.bincount(rest, minlength=size)
    return np.repeat(np.arange(size), counts)


def fault(w: Array, bound: float) -> Callable[[Any], float]:
    """Largest distance of a count from its share beyond what the method allows."""

    def worst(parts: Any) -> float:
        chosen = parts[0].astype(np.int64)
        counts = np.bincount(chosen, minlength=len(w))
        share = len(w) * w / w.sum()
        room = bound if bound < 10 else 8 * np.sqrt(share) + 8
        sorted_right = bool((np.diff(chosen) >= 0).all()) and len(chosen) == len(w)
        return float(np.max(np.abs(counts - share) - room)) if sorted_right else np.inf

    return worst


def cases(small: bool) -> list[Case]:
    size = 100_000 if small else 1_000_000
    rng = np.random.default_rng(3)
    w = np.exp(rng.normal(size=size))
    places = np.arange(size)
    twins: dict[str, tuple[Callable[[], Indices], float, float]] = {
        "systematic": (lambda: by_positions(w, (places + rng.random()) / size), 1, 8),
        "stratified": (lambda: by_positions(w, (places + rng.random(size)) / size), 2, 8),
        "multinomial": (lambda: by_positions(w, np.sort(rng.random(size))), 99, 4),
        "residual": (lambda: residual(w, rng), 99, 4),
    }

    def case(name: str) -> Case:
        twin, bound, goal = twins[name]
        return Case(
            f"resampling, {name}",
            f"({size},)",
            twin,
            lambda: _core.resample(w, size, name, KEY),
            1e-6,
            "counts within the bound of the method, or eight standard deviations",
            (goal, None),
            verify=fault(w, bound),
        )

    return [case(name) for name in twins]
