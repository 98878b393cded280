"""Do Monte Carlo errors of left-out log scores hold: exact draws of models known in closed form."""

from __future__ import annotations

from collections.abc import Callable

import numpy as np
import numpy.typing as npt
from scipy import special, stats

import steelyard as sy

Array = npt.NDArray[np.float64]
Problem = tuple[sy.Fit, Array]

REPEATS = 400
DRAWS = 1000
# Covered by 95 % intervals, and mean reported error over the spread that is seen.
COVERED = (0.89, 0.995)
ERROR = (0.8, 1.5)
NOISE = 0.3


def _normal_log(y: Array, mean: Array, variance: Array) -> Array:
    return np.asarray(-0.5 * (np.log(2 * np.pi * variance) + (y - mean) ** 2 / variance))


def _autocorrelated(rng: np.random.Generator, memory: float) -> Array:
    """Four chains of standard normal draws that start in equilibrium."""
    x = rng.normal(size=(4, DRAWS // 4))
    for t in range(1, x.shape[1]):
        x[:, t] = memory * x[:, t - 1] + np.sqrt(1 - memory**2) * x[:, t]
    return x


def normal(rng: np.random.Generator, memory: float = 0.0) -> Problem:
    """Thicknesses of a sheet pile, sd known, prior N(8, 1)."""
    y = 8.2 + NOISE * np.random.default_rng(606).normal(size=25)
    precision = 1 + len(y) / NOISE**2
    mean = (8 + y.sum() / NOISE**2) / precision
    x = _autocorrelated(rng, memory) if memory else rng.normal(size=DRAWS)
    mu = mean + x / np.sqrt(precision)
    loglik = _normal_log(y, mu[..., None], np.array(NOISE**2))
    rest = precision - 1 / NOISE**2
    exact = _normal_log(y, (precision * mean - y / NOISE**2) / rest, NOISE**2 + 1 / rest)
    return sy.Fit({"mu": mu}, loglik=loglik, ordered=memory > 0), exact


def chains(rng: np.random.Generator) -> Problem:
    """The same from four chains with an autocorrelation time of three."""
    return normal(rng, 0.5)


def poisson(rng: np.random.Generator) -> Problem:
    """Counts of pits a pile, gamma prior (2, 1)."""
    y = np.random.default_rng(607).poisson(3.0, size=30).astype(float)
    a, b = 2 + y.sum(), 1.0 + len(y)
    rate = rng.gamma(a, 1 / b, size=DRAWS)
    loglik = y * np.log(rate)[:, None] - rate[:, None] - special.gammaln(y + 1)
    return sy.Fit({"rate": rate}, loglik=loglik, ordered=False), stats.nbinom.logpmf(
        y, a - y, (b - 1) / b
    )


def total(problem: Problem) -> tuple[object, float]:
    fit, exact = problem
    return fit.leave_out().log_score, float(exact.sum())


def folds(rng: np.random.Generator) -> tuple[object, float]:
    """Five blocks of five thicknesses, each scored jointly."""
    fit, _ = normal(rng)
    y = 8.2 + NOISE * np.random.default_rng(606).normal(size=25)
    exact = 0.0
    for block in np.split(np.arange(25), 5):
        rest = np.delete(y, block)
        precision = 1 + len(rest) / NOISE**2
        mean = (8 + rest.sum() / NOISE**2) / precision
        covariance = NOISE**2 * np.eye(5) + 1 / precision
        exact += float(stats.multivariate_normal.logpdf(y[block], np.full(5, mean), covariance))
    return fit.k_fold(5, by="order").log_score, exact


def difference(rng: np.random.Generator) -> tuple[object, float]:
    """Two models of the same thicknesses, the other with twice the noise, draws of their own."""
    one, exact = normal(rng)
    y = 8.2 + NOISE * np.random.default_rng(606).normal(size=25)
    noise = 2 * NOISE
    precision = 1 + len(y) / noise**2
    mean = (8 + y.sum() / noise**2) / precision
    mu = mean + rng.normal(size=DRAWS) / np.sqrt(precision)
    other = sy.Fit(
        {"mu": mu}, loglik=_normal_log(y, mu[:, None], np.array(noise**2)), ordered=False
    )
    rest = precision - 1 / noise**2
    far = _normal_log(y, (precision * mean - y / noise**2) / rest, noise**2 + 1 / rest)
    found = one.leave_out().contrast(other.leave_out())
    return found.difference, float(exact.sum() - far.sum())


STUDIES: dict[str, Callable[[np.random.Generator], tuple[object, float]]] = {
    "total, normal": lambda rng: total(normal(rng)),
    "total, normal, chains": lambda rng: total(chains(rng)),
    "total, Poisson": lambda rng: total(poisson(rng)),
    "five blocks, normal": folds,
    "contrast of two normals": difference,
}


def report(small: bool) -> bool:
    """Print coverage and reported error a study; whether all keep their limits."""
    repeats = 50 if small else REPEATS
    print(f"\nErrors of left-out log scores, {repeats} repetitions of {DRAWS} draws")
    good = True
    for name, study in STUDIES.items():
        off, error, held = np.empty(repeats), np.empty(repeats), 0
        for i in range(repeats):
            estimate, exact = study(np.random.default_rng([606, i]))
            assert isinstance(estimate, sy.Estimate)
            low, high = estimate.error_interval(0.95)
            held += bool(low <= exact <= high)
            off[i], error[i] = float(estimate.value) - exact, float(estimate.error)
        covered, ratio = held / repeats, float(error.mean() / off.std())
        fits = COVERED[0] <= covered <= COVERED[1] and ERROR[0] <= ratio <= ERROR[1]
        # Fifty repetitions only show that everything works.
        good &= fits or small
        mark = "" if fits else "  OUTSIDE"
        print(f"  {name:26} covered {100 * covered:5.1f} %, error/spread {ratio:.2f}{mark}")
    return good
