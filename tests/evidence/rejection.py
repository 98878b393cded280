"""Exact independent draws from a two-dimensional density by rejection.

A grid of cells would carry its own discretisation error into every comparison. Rejection from a
Student-t envelope does not: its only approximation is the bound on the density ratio, which is
maximised numerically, raised by a margin, and checked against every single proposal.
"""

from __future__ import annotations

from collections.abc import Callable
from typing import Any

import numpy as np
from numpy.typing import NDArray
from scipy import optimize, stats

Array = NDArray[np.float64]

_ENVELOPE_DEGREES = 4.0
# The maximum of a smooth log ratio is found to about 1e-8; 0.01 costs one per cent of proposals.
_MARGIN = 0.01


def draw_by_rejection(
    log_density: Callable[[Array], Array],
    start: tuple[float, float],
    size: int,
    rng: np.random.Generator,
) -> Array:
    """Draw ``(size, 2)`` independent points from an unnormalised log density on the plane.

    `log_density` takes ``(n, 2)`` points and must have tails lighter than a Student-t with four
    degrees of freedom; `start` is a point near its mode.
    """
    envelope = _envelope(log_density, np.asarray(start), rng)
    bound = _log_bound(log_density, envelope, rng)
    accepted: list[Array] = []
    found = 0
    while found < size:
        points = envelope.rvs(size=size, random_state=rng)
        log_ratio = log_density(points) - envelope.logpdf(points)
        if np.max(log_ratio) > bound:
            raise AssertionError("the envelope does not cover the density: draws are not exact")
        kept = points[np.log(rng.random(size)) < log_ratio - bound]
        accepted.append(kept)
        found += len(kept)
    return np.concatenate(accepted)[:size]


def _envelope(log_density: Callable[[Array], Array], start: Array, rng: np.random.Generator) -> Any:
    """Student-t with about the mean and covariance of the density, found by weighted pilot draws.

    The curvature at the mode would do for a normal density; a skewed one needs its moments, else
    one proposal in thousands is accepted.
    """
    location, spread = start, np.eye(2)
    for _ in range(6):
        pilot = stats.multivariate_t(loc=location, shape=spread, df=_ENVELOPE_DEGREES)
        points = pilot.rvs(size=20_000, random_state=rng)
        log_ratio = log_density(points) - pilot.logpdf(points)
        weights = np.exp(log_ratio - np.max(log_ratio))
        location = np.average(points, axis=0, weights=weights)
        spread = np.cov(points.T, aweights=weights) + 1e-6 * np.eye(2)
    return stats.multivariate_t(loc=location, shape=spread, df=_ENVELOPE_DEGREES)


def _log_bound(
    log_density: Callable[[Array], Array], envelope: Any, rng: np.random.Generator
) -> float:
    """Largest log density ratio: the best of many proposals, each of the top ones climbed from."""

    def negative(point: Array) -> float:
        return -float(log_density(point[None, :])[0] - envelope.logpdf(point))

    points = envelope.rvs(size=4000, random_state=rng)
    log_ratio = log_density(points) - envelope.logpdf(points)
    tops = points[np.argsort(log_ratio)[-5:]]
    climbed = [-optimize.minimize(negative, top, method="Nelder-Mead").fun for top in tops]
    return max(climbed) + _MARGIN
