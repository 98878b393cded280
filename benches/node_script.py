"""What one writes for a node of a sweep or plan with NumPy and SciPy: weights, errors, verdicts."""

from __future__ import annotations

import numpy as np
import numpy.typing as npt
from scipy import fft, stats

Array = npt.NDArray[np.float64]

CHAINS = 4
PROBS = (0.05, 0.5, 0.95)
# Stands for the shape of a constant tail, −inf.
NO_TAIL = -9.0


def node(log_ratio: Array, columns: Array, lean: bool) -> list[Array]:
    """Values and errors; unless lean also what verdicts rest on, shapes and agreement of chains."""
    raw, w = _weights(log_ratio)
    count, means = len(w), w @ columns
    z = count * w[:, None] * (columns - means)
    errors = np.array([np.sqrt(_long_run(column, CHAINS) / count) for column in z.T])
    if lean:
        return [means, errors]
    z_raw = count * raw[:, None] * (columns - means)
    shapes = np.array([max(_shape(column), NO_TAIL) for column in z_raw.T])
    return [means, errors, shapes, _agreements(w, columns, means)]


def scenario(log_ratio: Array, columns: Array, lean: bool) -> list[Array]:
    """The same, and the shifts from the base with their own, and quantiles."""
    raw, w = _weights(log_ratio)
    count, plain = len(w), columns.mean(axis=0)
    means = w @ columns
    z = count * w[:, None] * (columns - means)
    moved = z - (columns - plain)
    errors, unsure = (
        np.array([np.sqrt(_long_run(column, CHAINS) / count) for column in part.T])
        for part in (z, moved)
    )
    quantiles = np.array([_quantiles(column, w) for column in columns.T])
    if lean:
        return [means, errors, means - plain, unsure, quantiles]
    z_raw = count * raw[:, None] * (columns - means)
    shapes, shift_shapes = (
        np.array([max(_shape(column), NO_TAIL) for column in part.T])
        for part in (z_raw, z_raw - (columns - plain))
    )
    equal = np.full(count, 1.0)
    agreement = [_agreement(equal, column, float(column.var())) for column in moved.T]
    return [
        means,
        errors,
        shapes,
        _agreements(w, columns, means),
        means - plain,
        unsure,
        shift_shapes,
        np.array(agreement),
        quantiles,
    ]


def _agreements(w: Array, columns: Array, means: Array) -> Array:
    pooled = w @ (columns - means) ** 2
    pairs = zip(columns.T, pooled, strict=True)
    return np.array([_agreement(w, f, float(v)) for f, v in pairs])


def _agreement(w: Array, f: Array, pooled: float) -> float:
    """Welch's (1951) test of the means of the chains, each with its own long-run error."""
    means, precisions, freedoms = [], [], []
    for w_chain, f_chain in zip(w.reshape(CHAINS, -1), f.reshape(CHAINS, -1), strict=True):
        count, mass = len(w_chain), w_chain.sum()
        share = w_chain / mass
        mean = share @ f_chain
        own = _long_run(count * share * (f_chain - mean), 1) / count
        variance = max(own, pooled * float(share @ share))
        means.append(mean)
        precisions.append(1 / variance)
        freedoms.append(max(pooled / variance / 3, 1.0))
    precision, mean, freedom = np.array(precisions), np.array(means), np.array(freedoms)
    if 3 * np.median(freedom) < 20:
        return 1.0
    centre = precision @ mean / precision.sum()
    q = precision @ (mean - centre) ** 2
    spread = float(np.sum((1 - precision / precision.sum()) ** 2 / freedom))
    scale = CHAINS**2 - 1
    statistic = q / (CHAINS - 1) / (1 + 2 * (CHAINS - 2) / scale * spread)
    return float(stats.f.sf(statistic, CHAINS - 1, scale / (3 * spread)))


def _quantiles(x: Array, w: Array) -> Array:
    order = np.argsort(x)
    sorted_w = w[order]
    middle = np.cumsum(sorted_w) - 0.5 * sorted_w
    return np.asarray(np.interp(PROBS, middle, x[order]))


def _weights(log_ratio: Array) -> tuple[Array, Array]:
    """Raw and smoothed weights."""
    log_ratio = log_ratio - log_ratio.max()
    raw = np.exp(log_ratio)
    efficiency = _efficiency(raw)
    count = len(raw)
    tail = int(np.ceil(min(0.2 * count, 3 * np.sqrt(count / efficiency))))
    order = np.argsort(log_ratio, kind="stable")
    largest, cut = order[-tail:], raw[order[-tail - 1]]
    w = raw.copy()
    if np.ptp(raw[largest]) > 0:
        shape, scale = _pareto(raw[largest] - cut)
        shape = (tail * shape + 5) / (tail + 10)
        p = (np.arange(1, tail + 1) - 0.5) / tail
        w[largest] = np.minimum(cut + scale * np.expm1(-shape * np.log1p(-p)) / shape, 1.0)
    return raw / raw.sum(), w / w.sum()


def _pareto(x: Array) -> tuple[float, float]:
    """Zhang and Stephens (2009), for ascending exceedances."""
    count = len(x)
    points = 20 + int(np.sqrt(count))
    j = np.arange(1, points + 1)
    b = 1 / x[-1] + (1 - np.sqrt(points / (j - 0.5))) / (3 * x[int(count / 4 + 0.5) - 1])
    k = np.log1p(-b[:, None] * x).mean(axis=1)
    profile = count * (np.log(-b / k) - k - 1)
    weight = np.exp(profile - profile.max())
    best = float((weight * b).sum() / weight.sum())
    shape = float(np.log1p(-best * x).mean())
    return shape, -shape / best


def _shape(z: Array) -> float:
    """The larger tail shape of both signs."""
    found, efficiency = -np.inf, _efficiency(z)
    for side in (z[z > 0], -z[z < 0]):
        tail = int(np.ceil(min(0.2 * len(side), 3 * np.sqrt(len(side) / efficiency))))
        if tail < 5:
            continue
        side = np.sort(side)
        above = side[-tail:] - side[-tail - 1]
        if np.ptp(above) == 0:
            continue
        found = max(found, (tail * _pareto(above)[0] + 5) / (tail + 10))
    return found


def _efficiency(z: Array) -> float:
    return float(min(1.0, z.var() / _long_run(z, CHAINS)))


def _long_run(z: Array, chains: int) -> float:
    """Geyer's initial monotone sequence over split chains, from one Fourier transform."""
    halves = z.reshape(2 * chains, -1)
    length = halves.shape[1]
    means = halves.mean(axis=1)
    centred = halves - means[:, None]
    size = fft.next_fast_len(2 * length)
    spectrum = fft.rfft(centred, size)
    lags = fft.irfft(spectrum * np.conj(spectrum), size)[:, :length].mean(axis=0) / (length - 1)
    between = means.var(ddof=1)
    shift = between - lags[0] / length
    gamma = lags + shift
    gamma[0] = lags[0] + shift
    pairs = gamma[: length // 2 * 2 : 2] + gamma[1 : length // 2 * 2 : 2]
    ends = np.flatnonzero(pairs <= 0)
    kept = np.minimum.accumulate(pairs[: ends[0] if len(ends) else None])
    return float(max(2 * kept.sum() - gamma[0], gamma[0] / np.log10(len(z))))
