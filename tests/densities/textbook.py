"""Textbook forms in mpmath that several references share."""

from __future__ import annotations

from typing import Any

import mpmath as mp


def log(x: Any) -> Any:
    return mp.log(x) if x > 0 else mp.mpf("-inf")


def normal_log(z: Any) -> Any:
    return -z * z / 2 - mp.log(2 * mp.pi) / 2


def normal_cdf(z: Any) -> Any:
    return mp.erfc(-z / mp.sqrt(2)) / 2


def t_log(z: Any, df: Any) -> Any:
    constant = mp.loggamma((df + 1) / 2) - mp.loggamma(df / 2) - mp.log(df * mp.pi) / 2
    return constant - (df + 1) / 2 * mp.log1p(z * z / df)


def beta_below(a: Any, b: Any, x: Any, y: Any) -> Any:
    """Regularised incomplete beta function of x, with y = 1 − x, by a series of one sign."""
    if x > (a + 1) / (a + b + 2):
        return 1 - beta_below(b, a, y, x)
    front = mp.exp(
        a * mp.log(x) + b * mp.log(y) - mp.loggamma(a) - mp.loggamma(b) + mp.loggamma(a + b)
    )
    return front / a * mp.hyp2f1(a + b, 1, a + 1, x)


def t_beyond(z: Any, df: Any) -> Any:
    """``P(|T| > |z|)``."""
    return beta_below(df / 2, mp.mpf(1) / 2, df / (df + z * z), z * z / (df + z * z))


def t_cdf(z: Any, df: Any) -> Any:
    return t_beyond(z, df) / 2 if z < 0 else 1 - t_beyond(z, df) / 2


def below(a: Any, x: Any) -> Any:
    return mp.gammainc(a, 0, x, regularized=True)


def above(a: Any, x: Any) -> Any:
    return mp.gammainc(a, x, mp.inf, regularized=True)


def skew_cdf(z: Any, slant: Any) -> Any:
    owen = mp.quad(
        lambda t: mp.exp(-z * z * (1 + t * t) / 2) / (1 + t * t), mp.linspace(0, slant, 9)
    ) / (2 * mp.pi)
    return normal_cdf(z) - 2 * owen
