"""Influence of every deletion on every quantity."""

from __future__ import annotations

import numpy as np
import numpy.typing as npt
from timing import Case

from steelyard import _core

Array = npt.NDArray[np.float64]


def script(loglik: Array, f: Array) -> Array:
    r = np.exp(-loglik - (-loglik).max(axis=0))
    r /= r.sum(axis=0)
    return np.asarray(r.T @ f - f.mean(axis=0))


def cases(small: bool) -> list[Case]:
    rng = np.random.default_rng(5)
    loglik = rng.normal(size=(4000, 1000 if small else 20000))
    f = rng.normal(size=(4000, 20))
    return [
        Case(
            "influence matrix",
            f"{loglik.shape} C × 20",
            lambda: script(loglik, f),
            lambda: _core.influence(loglik, f),
            1e-12,
            "sums of 4000 terms in another order",
            (4, 7.5),
            rounds=3,
        )
    ]
