"""Numerical kernels; arrays are aligned float64 of any strides, columns are independent."""

from collections.abc import Callable
from typing import TypeAlias

import numpy as np
import numpy.typing as npt

_Numbers: TypeAlias = npt.NDArray[np.float64] | npt.NDArray[np.float32]

__all__ = [
    "beta_tails",
    "chain_means",
    "contributions",
    "delete",
    "describe",
    "digamma",
    "effective_size",
    "extremes",
    "f_tail",
    "gamma_tails",
    "influence",
    "largest",
    "largest_share",
    "log_beta",
    "log_density",
    "log_normal_cdf",
    "log_sum_exp",
    "long_run_variance",
    "mean_square",
    "multi_sample",
    "normal_cdf",
    "normal_quantile",
    "normalise",
    "pareto_fit",
    "quantile",
    "quantile_many",
    "resample",
    "set_threads",
    "shortest_interval",
    "signed_tail_shape",
    "skew_normal_tails",
    "smooth",
    "smooth_weights",
    "sort_order",
    "study",
    "study_nodes",
    "tail_shape",
    "threads",
    "variances",
    "weigh",
    "weighted_covariance",
    "weighted_mean",
    "weighted_moments",
]

def log_sum_exp(x: _Numbers) -> npt.NDArray[np.float64]: ...
def normalise(x: _Numbers, out: npt.NDArray[np.float64]) -> npt.NDArray[np.float64]: ...
def effective_size(x: _Numbers, entropy: bool) -> npt.NDArray[np.float64]: ...
def largest_share(x: _Numbers) -> npt.NDArray[np.float64]: ...
def smooth(
    x: _Numbers,
    relative_efficiency: npt.NDArray[np.float64],
    out: npt.NDArray[np.float64],
    progress: Callable[[int, int], object] | None = None,
) -> npt.NDArray[np.float64]: ...
def tail_shape(
    x: _Numbers,
    relative_efficiency: npt.NDArray[np.float64],
    progress: Callable[[int, int], object] | None = None,
) -> npt.NDArray[np.float64]: ...
def signed_tail_shape(
    z: npt.NDArray[np.float64], relative_efficiency: npt.NDArray[np.float64]
) -> npt.NDArray[np.float64]: ...
def pareto_fit(x: npt.NDArray[np.float64]) -> tuple[float, float]: ...
def long_run_variance(
    z: npt.NDArray[np.float64], starts: npt.NDArray[np.int64], split: bool
) -> npt.NDArray[np.float64]: ...
def mean_square(z: npt.NDArray[np.float64]) -> npt.NDArray[np.float64]: ...
def weighted_mean(
    f: npt.NDArray[np.float64], w: npt.NDArray[np.float64]
) -> npt.NDArray[np.float64]: ...
def quantile(
    x: _Numbers,
    w: npt.NDArray[np.float64],
    probs: npt.NDArray[np.float64],
    order: npt.NDArray[np.int32] | None = None,
) -> npt.NDArray[np.float64]: ...
def shortest_interval(
    x: _Numbers,
    w: npt.NDArray[np.float64],
    mass: float,
    order: npt.NDArray[np.int32] | None = None,
) -> npt.NDArray[np.float64]: ...
def resample(
    w: npt.NDArray[np.float64], size: int, method: str, key: bytes
) -> npt.NDArray[np.int64]: ...
def delete(
    held: _Numbers,
    f: npt.NDArray[np.float64],
    scored: npt.NDArray[np.float64] | None = None,
    log_weights: npt.NDArray[np.float64] | None = None,
    starts: npt.NDArray[np.int64] | None = None,
    repeats: npt.NDArray[np.int64] | None = None,
    progress: Callable[[int, int], object] | None = None,
) -> tuple[
    npt.NDArray[np.float64],
    npt.NDArray[np.float64],
    npt.NDArray[np.float64],
    npt.NDArray[np.float64],
]: ...
def influence(
    loglik: _Numbers,
    f: npt.NDArray[np.float64],
    progress: Callable[[int, int], object] | None = None,
) -> npt.NDArray[np.float64]: ...
def f_tail(
    f: npt.NDArray[np.float64], first: float, second: npt.NDArray[np.float64]
) -> npt.NDArray[np.float64]: ...
def normal_cdf(x: npt.NDArray[np.float64]) -> npt.NDArray[np.float64]: ...
def normal_quantile(p: npt.NDArray[np.float64]) -> npt.NDArray[np.float64]: ...
def log_density(
    family: str,
    x: npt.NDArray[np.float64],
    hyper: list[npt.NDArray[np.float64]],
    repeat: int,
    out: npt.NDArray[np.float64],
) -> None: ...
def digamma(x: npt.NDArray[np.float64]) -> npt.NDArray[np.float64]: ...
def log_normal_cdf(x: npt.NDArray[np.float64]) -> npt.NDArray[np.float64]: ...
def log_beta(a: npt.NDArray[np.float64], b: npt.NDArray[np.float64]) -> npt.NDArray[np.float64]: ...
def gamma_tails(
    a: npt.NDArray[np.float64], x: npt.NDArray[np.float64]
) -> npt.NDArray[np.float64]: ...
def beta_tails(
    a: npt.NDArray[np.float64],
    b: npt.NDArray[np.float64],
    x: npt.NDArray[np.float64],
    y: npt.NDArray[np.float64],
) -> npt.NDArray[np.float64]: ...
def skew_normal_tails(
    z: npt.NDArray[np.float64], slant: npt.NDArray[np.float64]
) -> npt.NDArray[np.float64]: ...
def set_threads(n: int) -> None: ...
def threads() -> int: ...
def describe(x: _Numbers) -> npt.NDArray[np.float64]: ...
def sort_order(x: _Numbers) -> npt.NDArray[np.int32]: ...
def quantile_many(
    x: _Numbers,
    w: npt.NDArray[np.float64],
    probs: npt.NDArray[np.float64],
    order: npt.NDArray[np.int32] | None = None,
) -> npt.NDArray[np.float64]: ...
def weighted_moments(
    f: npt.NDArray[np.float64], w: npt.NDArray[np.float64]
) -> npt.NDArray[np.float64]: ...
def weighted_covariance(
    f: npt.NDArray[np.float64], w: npt.NDArray[np.float64]
) -> npt.NDArray[np.float64]: ...
def contributions(z: npt.NDArray[np.float64]) -> npt.NDArray[np.float64]: ...
def study_nodes(
    ratios: npt.NDArray[np.float64],
    columns: npt.NDArray[np.float64],
    events: npt.NDArray[np.float64],
    own: npt.NDArray[np.float64],
    equal_base: bool,
    starts: npt.NDArray[np.int64],
    ordered: bool,
    batches: npt.NDArray[np.int64],
    shift: bool,
    weights: npt.NDArray[np.float64] | None,
) -> npt.NDArray[np.float64]: ...
def multi_sample(
    log_densities: npt.NDArray[np.float64],
    counts: npt.NDArray[np.float64],
    sizes: npt.NDArray[np.float64],
    start: npt.NDArray[np.float64],
    solve: bool,
) -> tuple[npt.NDArray[np.float64], npt.NDArray[np.float64], npt.NDArray[np.float64], float]: ...
def extremes(x: npt.NDArray[np.float64]) -> tuple[float, float]: ...
def weigh(
    x: npt.NDArray[np.float64], out: npt.NDArray[np.float64]
) -> tuple[tuple[float, float, float, float], tuple[float, float, float, float]]: ...
def smooth_weights(
    x: npt.NDArray[np.float64],
    raw: npt.NDArray[np.float64],
    sums: tuple[float, float, float, float],
    relative_efficiency: float,
    out: npt.NDArray[np.float64],
) -> tuple[float, tuple[float, float, float, float]]: ...
def largest(
    x: npt.NDArray[np.float64], count: int
) -> tuple[npt.NDArray[np.int64], float] | None: ...
def variances(
    z: npt.NDArray[np.float64], starts: npt.NDArray[np.int64], split: bool
) -> npt.NDArray[np.float64]: ...
def chain_means(
    f: npt.NDArray[np.float64],
    w: npt.NDArray[np.float64] | None,
    starts: npt.NDArray[np.int64],
) -> npt.NDArray[np.float64]: ...
def study(
    f: npt.NDArray[np.float64],
    centre: npt.NDArray[np.float64],
    w: npt.NDArray[np.float64],
    raw: npt.NDArray[np.float64],
    starts: npt.NDArray[np.int64],
) -> tuple[npt.NDArray[np.float64], npt.NDArray[np.float64]]: ...
