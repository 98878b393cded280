"""Log-sum-exp, effective sizes, normalised weights."""

from __future__ import annotations

import numpy as np
import numpy.typing as npt
from scipy.special import logsumexp
from timing import Case

from steelyard import _core

Array = npt.NDArray[np.float64]

ROUNDING = "sums of up to 1e6 terms in another order"


def described(x: Array) -> tuple[Array, Array]:
    """Log-sum-exp and effective size of every column."""
    most = x.max(axis=0)
    r = np.exp(x - most)
    total = r.sum(axis=0)
    return most + np.log(total), total**2 / (r * r).sum(axis=0)


def normalised(x: Array) -> Array:
    """Normalised log weights of every column, by the one line that one would write."""
    return np.asarray(x - logsumexp(x, axis=0))


def normalised_by_hand(x: Array) -> Array:
    """The same with as few passes and copies as NumPy allows; all three are bound by memory."""
    z = x - x.max(axis=0)
    return np.asarray(z - np.log(np.exp(z).sum(axis=0)))


def ours(x: Array) -> tuple[Array, Array]:
    found = _core.describe(x)
    return found[0], found[1]


def cases(small: bool) -> list[Case]:
    draws, columns = 4000, 2000 if small else 20000
    rng = np.random.default_rng(1)
    x = rng.normal(size=(draws, columns))
    rows = np.ascontiguousarray(x.T).T
    long = rng.normal(size=(1_000_000, 1))
    single = x[:, : columns // 4].astype(np.float32)
    out = np.full_like(x, 1.0)

    def written() -> Array:
        _core.normalise(x, out)
        return out

    def case(name: str, layout: str, data: Array, goal: tuple[float, float]) -> Case:
        return Case(
            name, layout, lambda: described(data), lambda: ours(data), 1e-12, ROUNDING, goal
        )

    size = f"({draws}, {columns})"
    return [
        case("log-sum-exp, effective size", f"{size} C", x, (7, 12)),
        case("log-sum-exp, effective size", f"{size} Fortran", rows, (6, 10)),
        case("log-sum-exp, effective size", "(1000000,)", long, (5, 8)),
        Case(
            "log-sum-exp, effective size",
            f"({draws}, {columns // 4}) C float32",
            lambda: described(single.astype(np.float64)),
            lambda: ours(single),
            1e-12,
            ROUNDING,
            (None, None),
        ),
        Case(
            "normalised matrix, out=",
            f"{size} C",
            lambda: normalised(x),
            written,
            1e-12,
            ROUNDING,
            (14, 28),
            rounds=3,
        ),
        Case(
            "normalised matrix, out=, twin by hand",
            f"{size} C",
            lambda: normalised_by_hand(x),
            written,
            1e-12,
            ROUNDING,
            (None, None),
            rounds=3,
        ),
    ]
