"""A sweep, and a plan of many scenarios, against the script that one would write for each node."""

from __future__ import annotations

from typing import Any

import numpy as np
import numpy.typing as npt
from scipy import fft, stats
from timing import Case

import steelyard as sy

Array = npt.NDArray[np.float64]

_CHAINS = 4
_DRAWS = 4000
_PROBS = (0.05, 0.5, 0.95)
# Stands for the shape of a constant tail, −inf.
_NO_TAIL = -9.0


def cases(small: bool) -> list[Case]:
    side, scenarios = (8, 40) if small else (40, 2000)
    return [_sweep(side, lean=True), _sweep(side, lean=False), _plan(scenarios)]


def _fit(parameters: int) -> tuple[sy.Fit, Array, Array, Array]:
    rng = np.random.default_rng(11)
    shape = (_CHAINS, _DRAWS // _CHAINS)
    tau = np.abs(rng.normal(0.03, 0.012, size=shape)) + 0.002
    mu = rng.normal(0.1, 0.02, size=shape)
    rate = mu[..., None] + tau[..., None] * rng.normal(size=(*shape, parameters))
    fit = sy.Fit(
        {"mu": mu, "tau": tau, "rate": rate},
        {"mu": sy.Normal(0.1, 0.1), "tau": sy.HalfNormal(0.05)},
    )
    return fit, mu.reshape(-1), tau.reshape(-1), rate.reshape(_DRAWS, -1)


def _sweep(side: int, *, lean: bool) -> Case:
    """Values and errors of two means and a probability over two hyperparameters of priors."""
    fit, mu, tau, rate = _fit(4)
    means, scales = np.linspace(0.05, 0.15, side), np.linspace(0.02, 0.1, side)
    columns = np.stack([mu, rate[:, 1], (rate[:, 3] > 0.12).astype(float)], axis=1)
    old = stats.norm.logpdf(mu, 0.1, 0.1) + stats.halfnorm.logpdf(tau, 0, 0.05)

    def script() -> tuple[Array, ...]:
        out = []
        for mean in means:
            for scale in scales:
                new = stats.norm.logpdf(mu, mean, 0.1) + stats.halfnorm.logpdf(tau, 0, scale)
                out.append(_node(new - old, columns, lean))
        return tuple(np.array(part) for part in zip(*out, strict=True))

    def family(mean: float, scale: float) -> sy.Change:
        return sy.swap_prior(mu=sy.Normal(mean, 0.1), tau=sy.HalfNormal(scale))

    def ours() -> tuple[Array, ...]:
        asked = {"mu": "mu", "rate": "rate[1]", "high": "rate[3] > 0.12"}
        found = fit.sweep(family, {"mean": means, "scale": scales}, asked)
        kinds = (found.value, found.error)
        shown = [np.stack([kind[k].reshape(-1) for k in asked], 1) for kind in kinds]
        _ = [found.level[k] for k in asked]
        if not lean:
            shapes = [np.asarray(found.estimates[k].tail_shape).reshape(-1) for k in asked]
            shown.append(np.maximum(np.stack(shapes, 1), _NO_TAIL))
        return tuple(shown)

    what = "values, errors" if lean else "values, errors, tail shapes"
    return Case(
        f"sweep, {side} x {side}: {what}",
        f"3 quantities, {_DRAWS} draws",
        script,
        ours,
        1e-5,
        "another order of summation",
        (5, 10),
        rounds=3,
    )


def _plan(count: int) -> Case:
    """Values, paired shifts, their errors and quantiles of twenty parameters."""
    fit, mu, tau, rate = _fit(18)
    rng = np.random.default_rng(12)
    means, scales = rng.uniform(0.07, 0.13, count), rng.uniform(0.03, 0.08, count)
    columns = np.concatenate([mu[:, None], tau[:, None], rate], axis=1)
    old = stats.norm.logpdf(mu, 0.1, 0.1) + stats.halfnorm.logpdf(tau, 0, 0.05)

    def script() -> tuple[Array, ...]:
        out = []
        for mean, scale in zip(means, scales, strict=True):
            new = stats.norm.logpdf(mu, mean, 0.1) + stats.halfnorm.logpdf(tau, 0, scale)
            out.append(_scenario(new - old, columns))
        return tuple(np.array(part) for part in zip(*out, strict=True))

    def ours() -> tuple[Array, ...]:
        changes = {
            f"scenario {i}": sy.swap_prior(mu=sy.Normal(m, 0.1), tau=sy.HalfNormal(s))
            for i, (m, s) in enumerate(zip(means.tolist(), scales.tolist(), strict=True))
        }
        found = fit.triage(changes, ["mu", "tau", "rate"], probs=_PROBS)
        _ = [e.verdict.level for kind in (found.value, found.shift) for e in kind.values()]

        def side_by_side(figures: Any) -> Array:
            return np.concatenate([np.reshape(f, (count, -1)) for f in figures], axis=1)

        kinds = (found.value, found.shift)
        shown = [side_by_side(getattr(e, f) for e in k.values()) for k in kinds for f in _FIGURES]
        quantiles = [np.reshape(q, (count, -1, len(_PROBS))) for q in found.quantiles.values()]
        return (*shown, np.concatenate(quantiles, axis=1))

    return Case(
        f"plan, {count} scenarios with quantiles",
        f"20 parameters, {_DRAWS} draws",
        script,
        ours,
        1e-5,
        "another order of summation",
        (12, 25),
        rounds=1 if count > 100 else 3,
    )


_FIGURES = ("value", "error")


def _node(log_ratio: Array, columns: Array, lean: bool) -> list[Array]:
    raw, w = _weights(log_ratio)
    means = w @ columns
    z = len(w) * w[:, None] * (columns - means)
    errors = np.array([np.sqrt(_long_run(column) / len(w)) for column in z.T])
    if lean:
        return [means, errors]
    z_raw = len(w) * raw[:, None] * (columns - means)
    shapes = [max(_shape(column), _NO_TAIL) for column in z_raw.T]
    return [means, errors, np.array(shapes)]


def _scenario(log_ratio: Array, columns: Array) -> list[Array]:
    count = len(log_ratio)
    _, w = _weights(log_ratio)
    plain, means = columns.mean(axis=0), w @ columns
    z = count * w[:, None] * (columns - means)
    moved = z - (columns - plain)
    errors, unsure = (
        np.array([np.sqrt(_long_run(column) / count) for column in part.T]) for part in (z, moved)
    )
    quantiles = np.array([_quantiles(column, w) for column in columns.T])
    return [means, errors, means - plain, unsure, quantiles]


def _quantiles(x: Array, w: Array) -> Array:
    order = np.argsort(x)
    sorted_w = w[order]
    middle = np.cumsum(sorted_w) - 0.5 * sorted_w
    return np.asarray(np.interp(_PROBS, middle, x[order]))


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
    return float(min(1.0, z.var() / _long_run(z)))


def _long_run(z: Array) -> float:
    """Geyer's initial monotone sequence over split chains, from one Fourier transform."""
    halves = z.reshape(2 * _CHAINS, -1)
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
