"""Exact asymptotic errors for N(0, 1) draws reweighted to N(m, 1), independent or AR(1).

With ``w = exp(m x − m²/2) = Σ m^k/k! H_k(x)`` an influence series is a sum ``Σ c_k H_k``, and
along a stationary Gaussian AR(1) chain the Hermite polynomials are uncorrelated with one another
and each decays like ``ρ^(k t)``. The long-run variance is the variance of the series plus
``Σ k! c_k² 2ρ^k/(1 − ρ^k)``, which converges like a power series; the variance itself is known in
closed form.
"""

from __future__ import annotations

import math
from dataclasses import dataclass

import numpy as np
from numpy.typing import NDArray
from scipy import stats
from scipy.special import eval_hermitenorm

Array = NDArray[np.float64]
# With ρ = 0.6 term 24 of the correction is below 1e-5 of the whole.
TERMS = 25


@dataclass(frozen=True)
class Series:
    """An influence series: its exact variance and its Hermite coefficients."""

    variance: float
    coefficients: Array

    def long_run_variance(self, rho: float) -> float:
        """Of the series along a stationary AR(1) chain."""
        k = np.arange(1, len(self.coefficients))
        factorial = np.array([math.factorial(int(i)) for i in k], dtype=float)
        excess = 2 * rho**k / (1 - rho**k)
        return self.variance + float(np.sum(factorial * self.coefficients[1:] ** 2 * excess))

    def scaled(self, factor: float) -> Series:
        """The series times a number."""
        return Series(self.variance * factor**2, self.coefficients * factor)


def mean_series(m: float) -> Series:
    """``w (x − m) = ∂w/∂m``: ``c_k = m^(k−1)/(k−1)!``, variance ``(1 + m²) exp(m²)``."""
    return Series((1 + m**2) * math.exp(m**2), _powers(m, 1))


def sd_series(m: float) -> Series:
    """``w ((x − m)² − 1)/2 = ½ ∂²w/∂m²``: variance ``(m⁴ + 4m² + 2) exp(m²)/4``."""
    return Series((m**4 + 4 * m**2 + 2) * math.exp(m**2) / 4, 0.5 * _powers(m, 2))


def shift_series(m: float) -> Series:
    """``w (x − m) − x``: that of the mean less its first term, which is x itself."""
    series = _powers(m, 1)
    series[1] -= 1.0
    return Series((1 + m**2) * math.exp(m**2) - 1, series)


def evidence_series(m: float) -> Series:
    """``w − 1``: ``c_k = m^k/k!``, variance ``exp(m²) − 1``."""
    return Series(math.exp(m**2) - 1, _powers(m, 0))


def event_series(m: float, limit: float) -> Series:
    """``w (1{x > limit} − P)``: ``c_k = (E_q[1{x > limit} H_k] − P m^k)/k!``.

    ``H_k(m + y) = Σ_j C(k, j) m^(k−j) H_j(y)`` and ``∫_a^∞ φ H_j = φ(a) H_(j−1)(a)`` give the
    expectation; the variance is ``exp(m²) E_{N(2m, 1)}[(1{x > limit} − P)²]``.
    """
    inside, doubled = (float(stats.norm.sf(limit - centre)) for centre in (m, 2 * m))
    tails = [inside]
    for j in range(1, TERMS):
        tails.append(float(stats.norm.pdf(limit - m) * eval_hermitenorm(j - 1, limit - m)))
    coefficients = np.zeros(TERMS)
    for k in range(1, TERMS):
        above = sum(math.comb(k, j) * m ** (k - j) * tails[j] for j in range(k + 1))
        coefficients[k] = (above - inside * m**k) / math.factorial(k)
    variance = (1 - inside) ** 2 * doubled + inside**2 * (1 - doubled)
    return Series(math.exp(m**2) * variance, coefficients)


def quantile_series(m: float, p: float) -> Series:
    """Influence of a quantile: that of the distribution function there over the density."""
    limit = m + float(stats.norm.ppf(p))
    return event_series(m, limit).scaled(1 / float(stats.norm.pdf(limit - m)))


def sd_shift_series(m: float) -> Series:
    """``w ((x − m)² − 1)/2 − (x² − 1)/2``: that of the sd less its second term."""
    sd = sd_series(m)
    series = sd.coefficients.copy()
    series[2] -= 0.5
    return Series(sd.variance - 0.5, series)


def median_shift_series(m: float) -> Series:
    """Influence of the target's median less that of the base's, for m > 0.

    Under the target ``E[(1{x > m} − ½)(1{x > 0} − ½)] = (1 − Φ(m))/2``, the product of the two.
    """
    target, base = quantile_series(m, 0.5), quantile_series(0.0, 0.5)
    product = 2 * math.pi * 0.5 * float(stats.norm.sf(m))
    return Series(
        target.variance + base.variance - 2 * product, target.coefficients - base.coefficients
    )


def _powers(m: float, derivative: int) -> Array:
    """Hermite coefficients of a derivative of w in m: ``c_k = m^(k−d)/(k−d)!``."""
    series = np.zeros(TERMS)
    for k in range(max(derivative, 1), TERMS):
        series[k] = m ** (k - derivative) / math.factorial(k - derivative)
    return series
