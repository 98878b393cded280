"""Every distribution of single numbers in mpmath and in scipy, with random arguments.

The mpmath forms are the textbook formulas, written down independently of the package and
evaluated with enough digits that none of their cancellations matters.
"""

from __future__ import annotations

from collections.abc import Callable
from dataclasses import dataclass
from typing import Any

import mpmath as mp
import numpy as np
from scipy import stats

import steelyard as sy
from densities.textbook import (
    above,
    below,
    beta_below,
    log,
    normal_cdf,
    normal_log,
    skew_cdf,
    t_beyond,
    t_cdf,
    t_log,
)
from steelyard.densities import Distribution

DIGITS = 60
mp.mp.dps = DIGITS

Rng = np.random.Generator


@dataclass(frozen=True)
class Case:
    """One family: its textbook forms and where to try them."""

    make: type[Distribution]
    log_density: Callable[..., Any]
    # Distribution function and its complement, of the value and the hyperparameters.
    cdf: Callable[..., Any]
    complement: Callable[..., Any]
    hyper: Callable[[Rng], tuple[float, ...]]
    value: Callable[..., float]
    scipy: Callable[..., Any]
    is_discrete: bool = False


def _positive(rng: Rng) -> float:
    return float(np.exp(rng.normal(0, 1.5)))


def _real(rng: Rng) -> float:
    return float(3 * rng.standard_t(2))


def _around(rng: Rng, location: float, scale: float) -> float:
    return float(location + scale * rng.standard_t(3))


def _standard(log_density: Any, cdf: Any, complement: Any) -> tuple[Any, Any, Any]:
    """Location-scale forms from standard ones."""
    return (
        lambda x, m, s: log_density((x - m) / s) - mp.log(s),
        lambda x, m, s: cdf((x - m) / s),
        lambda x, m, s: complement((x - m) / s),
    )


def _location_scale(
    make: type[Distribution], log_density: Any, cdf: Any, complement: Any, scipy: Any
) -> Case:
    return Case(
        make,
        *_standard(log_density, cdf, complement),
        lambda r: (_real(r), _positive(r)),
        _around,
        scipy,
    )


CASES: list[Case] = [
    _location_scale(
        sy.Normal,
        normal_log,
        normal_cdf,
        lambda z: normal_cdf(-z),
        lambda m, s: stats.norm(m, s),
    ),
    _location_scale(
        sy.Cauchy,
        lambda z: -mp.log(mp.pi) - mp.log1p(z * z),
        lambda z: mp.atan2(1, -z) / mp.pi,
        lambda z: mp.atan2(1, z) / mp.pi,
        lambda m, s: stats.cauchy(m, s),
    ),
    _location_scale(
        sy.Laplace,
        lambda z: -abs(z) - mp.log(2),
        lambda z: mp.exp(z) / 2 if z < 0 else 1 - mp.exp(-z) / 2,
        lambda z: mp.exp(-z) / 2 if z > 0 else 1 - mp.exp(z) / 2,
        lambda m, s: stats.laplace(m, s),
    ),
    _location_scale(
        sy.Logistic,
        lambda z: -z - 2 * mp.log1p(mp.exp(-z)),
        lambda z: 1 / (1 + mp.exp(-z)),
        lambda z: 1 / (1 + mp.exp(z)),
        lambda m, s: stats.logistic(m, s),
    ),
    _location_scale(
        sy.Gumbel,
        lambda z: -z - mp.exp(-z),
        lambda z: mp.exp(-mp.exp(-z)),
        lambda z: -mp.expm1(-mp.exp(-z)),
        lambda m, s: stats.gumbel_r(m, s),
    ),
    Case(
        sy.HalfNormal,
        lambda x, s: normal_log(x / s) + mp.log(2) - mp.log(s),
        lambda x, s: mp.erf(x / s / mp.sqrt(2)),
        lambda x, s: mp.erfc(x / s / mp.sqrt(2)),
        lambda r: (_positive(r),),
        lambda r, s: s * _positive(r),
        lambda s: stats.halfnorm(0, s),
    ),
    Case(
        sy.HalfCauchy,
        lambda x, s: mp.log(2 / mp.pi) - mp.log(s) - mp.log1p((x / s) ** 2),
        lambda x, s: 2 / mp.pi * mp.atan(x / s),
        lambda x, s: 2 / mp.pi * mp.atan2(1, x / s),
        lambda r: (_positive(r),),
        lambda r, s: s * _positive(r),
        lambda s: stats.halfcauchy(0, s),
    ),
    Case(
        sy.StudentT,
        lambda x, df, m, s: t_log((x - m) / s, df) - mp.log(s),
        lambda x, df, m, s: t_cdf((x - m) / s, df),
        lambda x, df, m, s: t_cdf(-(x - m) / s, df),
        lambda r: (3 * _positive(r), _real(r), _positive(r)),
        lambda r, df, m, s: _around(r, m, s),
        lambda df, m, s: stats.t(df, m, s),
    ),
    Case(
        sy.HalfStudentT,
        lambda x, df, s: t_log(x / s, df) + mp.log(2) - mp.log(s),
        lambda x, df, s: 1 - t_beyond(x / s, df),
        lambda x, df, s: t_beyond(x / s, df),
        lambda r: (3 * _positive(r), _positive(r)),
        lambda r, df, s: s * _positive(r),
        # No half-t in scipy: twice the density from 0 on.
        lambda df, s: stats.truncate(stats.make_distribution(stats.t)(df=df) * s, lb=0),
    ),
    Case(
        sy.LogNormal,
        lambda x, m, s: normal_log((mp.log(x) - m) / s) - mp.log(x) - mp.log(s),
        lambda x, m, s: normal_cdf((log(x) - m) / s),
        lambda x, m, s: normal_cdf((m - log(x)) / s),
        lambda r: (_real(r), _positive(r)),
        lambda r, m, s: float(np.exp(_around(r, m, s))),
        lambda m, s: stats.lognorm(s, scale=np.exp(m)),
    ),
    Case(
        sy.Exponential,
        lambda x, rate: mp.log(rate) - rate * x,
        lambda x, rate: -mp.expm1(-rate * x),
        lambda x, rate: mp.exp(-rate * x),
        lambda r: (_positive(r),),
        lambda r, rate: _positive(r) / rate,
        lambda rate: stats.expon(0, 1 / rate),
    ),
    Case(
        sy.Gamma,
        lambda x, a, b: a * mp.log(b) - mp.loggamma(a) + (a - 1) * mp.log(x) - b * x,
        lambda x, a, b: below(a, b * x),
        lambda x, a, b: above(a, b * x),
        lambda r: (3 * _positive(r), _positive(r)),
        lambda r, a, b: a / b * _positive(r),
        lambda a, b: stats.gamma(a, scale=1 / b),
    ),
    Case(
        sy.InverseGamma,
        lambda x, a, b: a * mp.log(b) - mp.loggamma(a) - (a + 1) * mp.log(x) - b / x,
        lambda x, a, b: above(a, b / x),
        lambda x, a, b: below(a, b / x),
        lambda r: (3 * _positive(r), _positive(r)),
        lambda r, a, b: b / a * _positive(r),
        lambda a, b: stats.invgamma(a, scale=b),
    ),
    Case(
        sy.Beta,
        lambda x, a, b: (
            (a - 1) * mp.log(x)
            + (b - 1) * mp.log1p(-x)
            - mp.loggamma(a)
            - mp.loggamma(b)
            + mp.loggamma(a + b)
        ),
        lambda x, a, b: beta_below(a, b, x, 1 - x),
        lambda x, a, b: beta_below(b, a, 1 - x, x),
        lambda r: (3 * _positive(r), 3 * _positive(r)),
        lambda r, a, b: float(np.clip(r.beta(0.5 * a + 0.2, 0.5 * b + 0.2), 1e-12, 1 - 1e-12)),
        lambda a, b: stats.beta(a, b),
    ),
    Case(
        sy.Uniform,
        lambda x, low, high: -mp.log(high - low),
        lambda x, low, high: (x - low) / (high - low),
        lambda x, low, high: (high - x) / (high - low),
        lambda r: (lambda low: (low, low + _positive(r)))(_real(r)),
        lambda r, low, high: low + (high - low) * float(r.uniform(0.01, 0.99)),
        lambda low, high: stats.uniform(low, high - low),
    ),
    Case(
        sy.Weibull,
        lambda x, k, s: mp.log(k / s) + (k - 1) * mp.log(x / s) - (x / s) ** k,
        lambda x, k, s: -mp.expm1(-((x / s) ** k)),
        lambda x, k, s: mp.exp(-((x / s) ** k)),
        lambda r: (_positive(r), _positive(r)),
        lambda r, k, s: s * _positive(r) ** (1 / k),
        lambda k, s: stats.weibull_min(k, scale=s),
    ),
    Case(
        sy.Pareto,
        lambda x, a, m: mp.log(a) + a * mp.log(m) - (a + 1) * mp.log(x),
        lambda x, a, m: 1 - (m / x) ** a,
        lambda x, a, m: (m / x) ** a,
        lambda r: (_positive(r), _positive(r)),
        lambda r, a, m: m * (1 + _positive(r)),
        lambda a, m: stats.pareto(a, scale=m),
    ),
    Case(
        sy.SkewNormal,
        lambda x, m, s, a: (
            mp.log(2) - mp.log(s) + normal_log((x - m) / s) + mp.log(normal_cdf(a * (x - m) / s))
        ),
        lambda x, m, s, a: skew_cdf((x - m) / s, a),
        lambda x, m, s, a: skew_cdf(-(x - m) / s, -a),
        lambda r: (_real(r), _positive(r), _real(r)),
        lambda r, m, s, a: _around(r, m, s),
        lambda m, s, a: stats.skewnorm(a, m, s),
    ),
    Case(
        sy.Poisson,
        lambda k, rate: k * mp.log(rate) - rate - mp.loggamma(k + 1),
        lambda k, rate: above(mp.floor(k) + 1, rate),
        lambda k, rate: below(mp.floor(k) + 1, rate),
        lambda r: (5 * _positive(r),),
        lambda r, rate: float(r.poisson(rate * r.choice([0.3, 1, 2]))),
        lambda rate: stats.poisson(rate),
        is_discrete=True,
    ),
    Case(
        sy.Binomial,
        lambda k, n, p: (
            mp.loggamma(n + 1)
            - mp.loggamma(k + 1)
            - mp.loggamma(n - k + 1)
            + k * mp.log(p)
            + (n - k) * mp.log1p(-p)
        ),
        lambda k, n, p: beta_below(n - mp.floor(k), mp.floor(k) + 1, 1 - p, p) if k < n else 1,
        lambda k, n, p: beta_below(mp.floor(k) + 1, n - mp.floor(k), p, 1 - p) if k < n else 0,
        lambda r: (float(r.integers(1, 60)), float(r.uniform(0.02, 0.98))),
        lambda r, n, p: float(r.integers(0, int(n) + 1)),
        lambda n, p: stats.binom(int(n), p),
        is_discrete=True,
    ),
    Case(
        sy.NegativeBinomial,
        lambda k, m, d: (
            mp.loggamma(k + d)
            - mp.loggamma(k + 1)
            - mp.loggamma(d)
            + d * mp.log(d / (d + m))
            + k * mp.log(m / (d + m))
        ),
        lambda k, m, d: beta_below(d, mp.floor(k) + 1, d / (d + m), m / (d + m)),
        lambda k, m, d: beta_below(mp.floor(k) + 1, d, m / (d + m), d / (d + m)),
        lambda r: (5 * _positive(r), 3 * _positive(r)),
        lambda r, m, d: float(r.poisson(m * r.choice([0.3, 1, 2]))),
        lambda m, d: stats.nbinom(d, d / (d + m)),
        is_discrete=True,
    ),
]

BY_MAKE = {case.make: case for case in CASES}


def exact(value: float) -> Any:
    """A float as mpmath holds it, digit for digit."""
    return mp.mpf(float(value))


def draw(case: Case, seed: int, count: int) -> list[tuple[tuple[float, ...], float]]:
    """Random hyperparameters, each with a value inside the support."""
    rng = np.random.default_rng(seed)
    pairs = []
    for _ in range(count):
        hyper = case.hyper(rng)
        pairs.append((hyper, case.value(rng, *hyper)))
    return pairs
