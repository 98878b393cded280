"""Relative constants of ten fits of 4,000 draws, against Newton's method written with NumPy."""

from __future__ import annotations

import numpy as np
import numpy.typing as npt
from timing import Case

from steelyard import _core

Array = npt.NDArray[np.float64]


def cases(small: bool) -> list[Case]:
    fits, draws = (4, 1000) if small else (10, 4000)
    rng = np.random.default_rng(7)
    precision, centre = np.linspace(1, 4, fits), np.linspace(0, 2, fits)
    x = (centre + rng.normal(size=(draws, fits)) / np.sqrt(precision)).T.reshape(-1)
    log_q = -0.5 * precision * (x[:, None] - centre) ** 2
    counts, sizes = np.ones(len(x)), np.full(fits, float(draws))

    def shares_at(f: Array) -> tuple[Array, Array]:
        terms = log_q + f + np.log(sizes)
        top = terms.max(axis=1, keepdims=True)
        shares = np.exp(terms - top)
        total = shares.sum(axis=1, keepdims=True)
        shares /= total
        return shares, (top + np.log(total))[:, 0]

    def twin() -> tuple[Array, Array, Array]:
        """Constants, and at them what weights are made of: shares and the mixture's density."""
        f = np.zeros(fits)
        for _ in range(100):
            shares, _ = shares_at(f)
            slope = shares.sum(axis=0) - sizes
            curve = np.diag(shares.sum(axis=0)) - shares.T @ shares
            step = np.linalg.solve(curve[1:, 1:], -slope[1:])
            f[1:] += step
            if np.abs(step).max() < 1e-9:
                break
        return f, *shares_at(f)

    return [
        Case(
            "multi-sample constants",
            f"{fits} fits of {draws}",
            twin,
            lambda: _core.multi_sample(log_q, counts, sizes, np.zeros(fits), True)[:3],
            1e-9,
            "both stop at a step of 1e-9",
            (10.0, None),
        )
    ]
