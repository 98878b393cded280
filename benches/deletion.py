"""Leaving out every observation: scores, shapes, sizes, errors, and what quantities do."""

from __future__ import annotations

import math
import statistics
import time
from typing import Any

import numpy as np
import numpy.typing as npt
from smooth import smoothed_column
from timing import Case

from steelyard import _core

Array = npt.NDArray[np.float64]

CHAINS = 4
QUANTITIES = 20
# What influence of 20 quantities with its errors may cost, the deletion itself included.
MOST_WITH_QUANTITIES = 1.7
_REASON = "shapes by products instead of sums of logarithms; squares in single precision"


def log_sum(x: Array) -> float:
    top = x.max()
    return float(top + np.log(np.exp(x - top).sum()))


def long_run(z: Array, starts: Array) -> float:
    """Geyer's initial monotone sequence over split chains, lags by Fourier transforms."""
    length = int(starts[1] - starts[0]) // 2
    halves = z.reshape(-1, length)
    count, draws = len(halves), z.size
    means = halves.mean(axis=1)
    centred = halves - means[:, None]
    spectrum = np.abs(np.fft.rfft(centred, 2 * length, axis=1)) ** 2
    lags = np.fft.irfft(spectrum.sum(axis=0))[:length] / (count * (length - 1))
    between = count / (count - 1) * np.mean((means - means.mean()) ** 2)
    gamma = lags + between - lags[0] / length
    pairs = gamma[0 : length - 1 : 2] + gamma[1:length:2]
    bad = np.flatnonzero(pairs <= 0)
    kept = np.minimum.accumulate(pairs[: bad[0]] if bad.size else pairs)
    return max(2 * float(kept.sum()) - gamma[0], gamma[0] / math.log10(draws))


def script(loglik: Array, starts: Array | None) -> tuple[Array, ...]:
    """Column by column, since each then stays in the cache: a quarter faster than whole arrays."""
    draws, columns = loglik.shape
    figures, totals = np.empty((columns, 10)), np.zeros((3, draws))
    lw = np.empty(draws)
    for j in range(columns):
        held = np.ascontiguousarray(loglik[:, j])
        raw = np.exp(held.min() - held)
        efficiency = 1.0
        if starts is not None:
            efficiency = min(1.0, float(np.var(raw)) / long_run(raw, starts))
        raw /= raw.sum()
        length = math.ceil(min(0.2 * draws, 3 * math.sqrt(draws / efficiency)))
        p = (np.arange(length) + 0.5) / length
        shape = smoothed_column(-held, length, p, lw)
        w = np.exp(lw)
        joint = lw + held
        score = log_sum(joint)
        z = draws * (np.exp(joint - score) - w)
        inside = log_sum(held)
        variance = np.mean(z**2) if starts is None else long_run(z, starts)
        c = z - z.mean()
        square = c * c
        # How unequal the density is, and how many draws carry the error: its degrees of freedom.
        spread = float(np.exp(joint + held - 2 * score).sum()) - 1
        carried = float(square.sum()) ** 3 / float((square * c).sum()) ** 2
        carried *= math.sqrt(efficiency)
        totals[0] += z
        totals[1] += 1 - draws * raw
        totals[2] += draws * np.exp(held - inside) - 1
        figures[j] = (
            score,
            math.sqrt(variance / draws),
            inside - math.log(draws),
            shape,
            1 / (w**2).sum(),
            math.exp(-(w * lw).sum()),
            w.max(),
            spread,
            carried,
            efficiency,
        )
    return figures, totals


def ours(loglik: Array, starts: Array | None) -> tuple[Array, ...]:
    none = np.zeros((len(loglik), 0))
    figures, totals, _, _ = _core.delete(loglik, none, starts=starts)
    return figures[:, :10], totals


def influences(loglik: Array, f: Array) -> tuple[Array, ...]:
    """Shifts and the squares of their influence series, by products of whole blocks."""
    draws, columns = loglik.shape
    length = math.ceil(min(0.2 * draws, 3 * math.sqrt(draws)))
    p = (np.arange(length) + 0.5) / length
    shifts, squares = np.empty((columns, f.shape[1])), np.empty((columns, f.shape[1]))
    for start in range(0, columns, 100):
        part = slice(start, start + 100)
        block = np.ascontiguousarray(-loglik[:, part])
        lw = np.empty_like(block)
        for j in range(block.shape[1]):
            smoothed_column(block[:, j], length, p, lw[:, j])
        w = np.exp(lw)
        shifts[part] = w.T @ f
        for j, m in enumerate(shifts[part]):
            z = w[:, j, None] * (f - m) - (f + m * (f**2 - 1) / 2) / draws
            squares[start + j] = (z**2).sum(axis=0)
    return shifts, np.sqrt(squares * draws)


def data(small: bool) -> tuple[Array, Array, Array]:
    """Draws of a corrosion rate, readings of which some stand apart, and quantities."""
    draws, columns = 4000, 1000 if small else 20_000
    rng = np.random.default_rng(9)
    rate, readings = rng.normal(size=(draws, 3)), rng.normal(size=(3, columns))
    loglik = -0.5 * (0.4 * rate @ readings - rng.standard_t(4, size=columns)) ** 2
    f = rng.normal(size=(draws, QUANTITIES)) + rate[:, :1]
    return loglik, (f - f.mean(axis=0)) / f.std(axis=0), np.arange(CHAINS + 1) * draws // CHAINS


def cases(small: bool) -> list[Case]:
    loglik, f, starts = data(small)
    few, rounds = loglik[:, :500], 3
    layout = f"{loglik.shape} C"
    return [
        Case(
            "deletion, independent draws",
            layout,
            lambda: script(loglik, None),
            lambda: ours(loglik, None),
            1e-8,
            _REASON,
            (12, 20),
            rounds=rounds,
        ),
        Case(
            "deletion, draws in chains",
            layout,
            lambda: script(loglik, starts),
            lambda: ours(loglik, starts),
            1e-8,
            _REASON,
            (12, 20),
            rounds=rounds,
        ),
        Case(
            "influence of deletions and its errors",
            f"{few.shape} C × {QUANTITIES}",
            lambda: influences(few, f),
            lambda: _influences(few, f),
            1e-5,
            _REASON,
            (None, None),
            rounds=rounds,
        ),
    ]


def _influences(loglik: Array, f: Array) -> tuple[Array, ...]:
    _, _, shift, square = _core.delete(loglik, f)
    return shift, np.sqrt(square * len(f))


def more(small: bool) -> bool:
    """What influence adds to the cost of a deletion, in turns; whether that is little enough."""
    loglik, f, starts = data(small)
    none = np.zeros((len(loglik), 0))
    good = True
    for name, chains in (("independent draws", None), ("draws in chains", starts)):
        for threads in (1, 2):
            _core.set_threads(threads)
            seconds: dict[str, list[float]] = {"without": [], "with": []}
            for _ in range(3 if small else 5):
                for key, quantities in (("without", none), ("with", f)):
                    began = time.perf_counter()
                    _core.delete(loglik, quantities, starts=chains)
                    seconds[key].append(time.perf_counter() - began)
            ratio = statistics.median(seconds["with"]) / statistics.median(seconds["without"])
            good &= ratio <= MOST_WITH_QUANTITIES
            print(
                f"deletion, {name}, {threads} thread(s): with {QUANTITIES} quantities' influence "
                f"{ratio:.2f} times the cost, allowed {MOST_WITH_QUANTITIES:g}"
                + ("" if ratio <= MOST_WITH_QUANTITIES else "  ABOVE")
            )
    return good


def large() -> bool:
    """Leaving out of a memory map larger than what may be held; see `deletion_large`."""
    import deletion_large

    report: Any = deletion_large.report
    return bool(report())
