"""Long-run variance by the initial monotone sequence."""

from __future__ import annotations

import math

import numpy as np
import numpy.typing as npt
from timing import Case

from steelyard import _core

Array = npt.NDArray[np.float64]


def script(z: Array, chains: int) -> float:
    """Split chains, autocovariances by Fourier transform, pairs while positive, monotone."""
    halves = z.reshape(2 * chains, -1)
    count, length = halves.shape
    centred = halves - halves.mean(axis=1, keepdims=True)
    size = 2 ** math.ceil(math.log2(2 * length))
    power = np.abs(np.fft.rfft(centred, size)) ** 2
    lags = np.fft.irfft(power, size)[:, :length].sum(axis=0) / (count * (length - 1))
    between = halves.mean(axis=1).var(ddof=1)
    gamma = lags + between - lags[0] / length
    gamma[1:] += lags[0] / length - lags[0] + lags[0] * (1 - 1 / length)
    pairs = gamma[: length // 2 * 2].reshape(-1, 2).sum(axis=1)
    stop = np.argmax(pairs <= 0) if (pairs <= 0).any() else len(pairs)
    total = np.minimum.accumulate(pairs[:stop]).sum()
    return float(max(2 * total - gamma[0], gamma[0] / math.log10(len(z))))


def autoregressive(rho: float, size: int, chains: int) -> Array:
    rng = np.random.default_rng(6)
    noise = rng.normal(size=(size // chains, chains))
    for step in range(1, len(noise)):
        noise[step] += rho * noise[step - 1]
    return np.ascontiguousarray(noise.T).reshape(-1, 1)


def cases(small: bool) -> list[Case]:
    size = 65_536 if small else 1_000_000
    starts = np.arange(5, dtype=np.int64) * (size // 4)

    def case(name: str, z: Array) -> Case:
        return Case(
            f"long-run variance, {name}",
            f"4 chains of {size // 4}",
            lambda: np.array([script(z[:, 0], 4)]),
            lambda: _core.long_run_variance(z, starts, True),
            1e-9,
            "autocovariances with and without a Fourier transform",
            (None, None),
        )

    drift = np.repeat(np.arange(4.0), size // 4)[:, None]
    return [
        case("independent draws", autoregressive(0.0, size, 4)),
        case("autoregressive, 0.9", autoregressive(0.9, size, 4)),
        case("chains that disagree", autoregressive(0.5, size, 4) + drift),
    ]
