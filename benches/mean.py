"""Weighted means, variances and covariances."""

from __future__ import annotations

import numpy as np
import numpy.typing as npt
from timing import Case

from steelyard import _core

Array = npt.NDArray[np.float64]


def cases(small: bool) -> list[Case]:
    rng = np.random.default_rng(7)
    f = rng.normal(size=(20_000 if small else 200_000, 20))
    w = rng.random(len(f))
    w /= w.sum()

    def moments() -> Array:
        mean = w @ f
        return np.stack([mean, w @ (f - mean) ** 2])

    reason = "sums of 2e5 terms in another order"
    return [
        Case(
            "weighted mean and variance",
            f"{f.shape} C",
            moments,
            lambda: _core.weighted_moments(f, w),
            1e-12,
            reason,
            (None, None),
        ),
        Case(
            "weighted covariance matrix",
            f"{f.shape} C",
            lambda: np.cov(f, rowvar=False, aweights=w, ddof=0),
            lambda: _core.weighted_covariance(f, w),
            1e-12,
            reason,
            (None, None),
        ),
    ]
