"""A simultaneous band for the distribution function of uniform numbers."""

from __future__ import annotations

from functools import cache

import numpy as np

from steelyard.base.draws import Array

__all__ = ["band_of", "grid_of"]

# Simulated samples behind the width of a band: its level is known to ± 0.4 %.
_SAMPLES = 4000
_MOST_POINTS = 50


def grid_of(count: int) -> Array:
    """Where the distribution function of so many numbers is looked at."""
    points = min(_MOST_POINTS, max(count, 4))
    return np.arange(1, points) / points


def band_of(count: int, grid: Array, level: float) -> tuple[Array, Array]:
    """
    Limits that the share of `count` independent uniform numbers up to each point of the grid keeps.

    ``p ± c sqrt(p (1 − p)/n)`` with one factor c for all points, the quantile of the largest
    standardised gap in simulated samples: so the shares stay inside everywhere with probability
    `level`, for any number of observations.
    """
    width = _factor(count, len(grid) + 1, level) * np.sqrt(grid * (1 - grid) / count)
    return np.clip(grid - width, 0.0, 1.0), np.clip(grid + width, 0.0, 1.0)


@cache
def _factor(count: int, points: int, level: float) -> float:
    generator = np.random.default_rng([count, points])
    counts = generator.multinomial(count, np.full(points, 1 / points), size=_SAMPLES)
    grid = np.arange(1, points) / points
    share = np.cumsum(counts, axis=1)[:, :-1] / count
    gap = np.abs(share - grid) / np.sqrt(grid * (1 - grid) / count)
    # A little above the quantile: gaps of few numbers are lattice points, met to rounding.
    return float(np.quantile(gap.max(axis=1), level, method="higher")) * (1 + 1e-9)
