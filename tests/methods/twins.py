"""Slow, obvious versions in plain numpy of what METHODS defines, written from its text alone."""

from __future__ import annotations

import math

import numpy as np
from numpy.typing import NDArray
from scipy import signal

Array = NDArray[np.float64]


def autoregression(rng: np.random.Generator, rho: float, chains: int, length: int) -> Array:
    """Stationary standard normal AR(1) chains, shape ``(chains, length)``."""
    start = rng.normal(size=(chains, 1))
    steps = math.sqrt(1 - rho**2) * rng.normal(size=(chains, length - 1))
    rest, _ = signal.lfilter([1.0], [1.0, -rho], steps, axis=1, zi=rho * start)
    return np.concatenate([start, rest], axis=1)


def long_run_variance(chains: list[Array]) -> float:
    """Geyer's initial monotone positive sequence over split chains (METHODS 2)."""
    halves = [half for c in chains for half in _split(c)]
    n = sum(map(len, halves))
    pieces = len(halves)
    grand = np.concatenate(halves).mean()
    between = sum(len(h) * (h.mean() - grand) ** 2 for h in halves) / n
    between *= pieces / (pieces - 1) if pieces > 1 else 0.0
    within = sum(len(h) * h.var(ddof=1) for h in halves) / n
    gamma_zero = within * (1 - pieces / n) + between
    longest = max(map(len, halves))
    gamma = [gamma_zero]
    for lag in range(1, longest):
        gamma.append(gamma_zero - within + _autocovariance(halves, lag, n))
    pairs: list[float] = []
    for j in range(len(gamma) // 2):
        pair = gamma[2 * j] + gamma[2 * j + 1]
        if pair <= 0:
            break
        pairs.append(min([pair, *pairs[-1:]]))
    floor = gamma_zero / math.log10(max(n, 10))
    return max(-gamma_zero + 2 * sum(pairs), floor)


def _split(chain: Array) -> list[Array]:
    if len(chain) < 8:
        return [chain]
    return [chain[: len(chain) // 2], chain[len(chain) // 2 :]]


def _autocovariance(halves: list[Array], lag: int, n: int) -> float:
    total = 0.0
    for half in halves:
        size = len(half)
        if size <= lag:
            continue
        centred = half - half.mean()
        product = float(centred[:-lag] @ centred[lag:]) / size
        total += size / n * size / (size - 1) * product
    return total


def weighted_quantile(x: Array, w: Array, probs: Array) -> Array:
    """``F(x_(i)) = Σ_{j≤i} w_(j) − w_(i)/2`` inverted, equal values sharing one step."""
    kept = w > 0
    values, place = np.unique(x[kept], return_inverse=True)
    step = np.bincount(place, weights=w[kept]) / w[kept].sum()
    return np.interp(probs, np.cumsum(step) - step / 2, values)


def shortest_interval(x: Array, w: Array, mass: float) -> tuple[float, float]:
    """The shortest interval between two draws that holds `mass`, by trying all pairs."""
    w = w / w.sum()
    best = (float(x.min()), float(x.max()))
    for low in np.sort(x):
        for high in np.sort(x):
            held = w[(x >= low) & (x <= high)].sum()
            if high >= low and held >= mass - 1e-12 and high - low < best[1] - best[0]:
                best = (float(low), float(high))
    return best
