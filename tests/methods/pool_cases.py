"""Pools whose judged figure is known: what the tests of the reasons hold."""

from __future__ import annotations

from typing import Any

import numpy as np

import steelyard as sy

N = 1000


def linked(distance: float) -> sy.Answer:
    """
    Base of two pooled unit normals at evenly spaced probabilities, so far apart.

    They share ``Σ P (1 − P)`` draws: 12.5 at a distance of 4.8, 7.1 at 5.2; 3.9 at 5.6, 2.1 at 6.
    """
    return _pool(distance, distance).base


def contradicting(shift: float) -> sy.Answer:
    """Base of two pooled unit normals at 0 and 1, whose draws are those of 0 and 1 + shift."""
    return _pool(1.0, 1.0 + shift).base


def disjoint(*, called: bool) -> sy.Answer:
    """Base of two posteriors of disjoint data, their likelihoods callables or arrays."""
    fits = []
    for reading in (0.0, 1.0):
        x = np.random.default_rng(int(reading)).normal(reading / 1.01, 1.01**-0.5, (4, N))

        def loglik(draws: Any, reading: float = reading) -> np.ndarray:
            return np.asarray(-0.5 * (draws["x"][:, None] - reading) ** 2)

        held = loglik if called else loglik({"x": x.reshape(-1)})
        fits.append(sy.Fit({"x": x}, {"x": sy.Normal(0, 10)}, {"readings": held}))
    return sy.pool(fits, data="disjoint").base


def _pool(stated: float, drawn: float) -> sy.Pool:
    # In random order, so that the draws look independent; their distribution is exact.
    u = (np.arange(N) + 0.5) / N
    z = np.sqrt(2) * _inverse_erf(2 * u - 1)
    fits = []
    for centre, seed in ((0.0, 1), (drawn, 2)):
        x = centre + np.random.default_rng(seed).permutation(z)
        mean = 0.0 if centre == 0.0 else stated
        fits.append(sy.Fit({"x": x}, {"x": sy.Normal(mean, 1.0)}, ordered=False))
    return sy.pool(fits, data="same", common="likelihood")


def _inverse_erf(y: np.ndarray) -> np.ndarray:
    from scipy.special import erfinv

    return np.asarray(erfinv(y))
