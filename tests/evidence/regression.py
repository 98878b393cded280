"""Normal linear regression with conjugate or flat priors (family 1, P1.4 and P1.6).

``beta | sigma2 ~ N(m, sigma2 V)`` and ``sigma2 ~ inverse gamma(a, b)``, before and after the
data, in closed form and drawn exactly. Precisions are kept as triangular factors ``T`` with
``T'T = V^-1``: the Longley design has a condition number of 5e9, and its square would leave no
digits.
"""

from __future__ import annotations

from collections.abc import Callable, Mapping
from dataclasses import dataclass
from typing import Any

import numpy as np
from numpy.typing import NDArray
from scipy import linalg, special, stats

Array = NDArray[np.float64]


@dataclass(frozen=True)
class NormalInverseGamma:
    """A joint distribution of coefficients and error variance."""

    mean: Array
    factor: Array
    a: float
    b: float

    def log_density(self, draws: Mapping[str, Array]) -> Array:
        """Complete log density; with a <= 0 improper, and then without its constant."""
        beta, sigma2 = draws["beta"], draws["sigma2"]
        scaled = (beta - self.mean) @ self.factor.T
        size = len(self.mean)
        log_determinant = np.sum(np.log(np.abs(np.diag(self.factor))))
        normal = log_determinant - 0.5 * size * np.log(2 * np.pi * sigma2)
        normal -= 0.5 * np.sum(scaled**2, axis=1) / sigma2
        constant = self.a * np.log(self.b) - special.gammaln(self.a) if self.a > 0 else 0.0
        return normal + constant - (self.a + 1) * np.log(sigma2) - self.b / sigma2

    def given(self, design: Array, response: Array) -> NormalInverseGamma:
        """The posterior after the data."""
        stacked = np.vstack([self.factor, design])
        target = np.concatenate([self.factor @ self.mean, response])
        mean, factor, squares = _least_squares(stacked, target)
        return NormalInverseGamma(mean, factor, self.a + len(response) / 2, self.b + squares / 2)

    def draw(self, size: int, rng: np.random.Generator) -> dict[str, Array]:
        """Exact independent draws of ``beta`` (size, p) and ``sigma2`` (size,)."""
        sigma2 = self.b / rng.gamma(self.a, size=size)
        normal = rng.standard_normal((size, len(self.mean)))
        step = linalg.solve_triangular(self.factor, normal.T).T
        return {"beta": self.mean + np.sqrt(sigma2)[:, None] * step, "sigma2": sigma2}

    def beta_sd(self) -> Array:
        """Marginal sds of the coefficients: a Student-t with 2a degrees of freedom."""
        inverse = linalg.solve_triangular(self.factor, np.eye(len(self.mean)))
        return np.sqrt(self.b / (self.a - 1) * np.sum(inverse**2, axis=1))


def reference_posterior(design: Array, response: Array) -> NormalInverseGamma:
    """The posterior under the reference prior, flat in beta and 1/sigma2."""
    mean, factor, squares = _least_squares(design, response)
    freedom = design.shape[0] - design.shape[1]
    return NormalInverseGamma(mean, factor, freedom / 2, squares / 2)


def reference_prior(draws: Mapping[str, Array]) -> Array:
    """Log of 1/sigma2, an improper density."""
    return -np.log(draws["sigma2"])


def _least_squares(design: Array, response: Array) -> tuple[Array, Array, float]:
    """Coefficients, triangular factor and residual sum of squares, by scaled orthogonal factors."""
    scale = np.linalg.norm(design, axis=0)
    orthogonal, triangular = linalg.qr(design / scale, mode="economic")
    coefficients = linalg.solve_triangular(triangular, orthogonal.T @ response)
    residual = response - (design / scale) @ coefficients
    # One step of refinement: the residual is small, so its correction restores lost digits.
    coefficients += linalg.solve_triangular(triangular, orthogonal.T @ residual)
    residual = response - (design / scale) @ coefficients
    return coefficients / scale, triangular * scale, float(residual @ residual)


def loglik(design: Array, response: Array) -> Callable[[Mapping[str, Any]], Array]:
    """Log densities of the responses, ``(n, N)``, as a callable likelihood term."""

    def term(draws: Mapping[str, Any]) -> Array:
        fitted = draws["beta"] @ design.T
        return stats.norm.logpdf(response, fitted, np.sqrt(draws["sigma2"])[:, None])

    return term
