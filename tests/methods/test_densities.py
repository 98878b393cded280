"""Log densities against mpmath at 50 digits and against scipy.stats.

Tolerance: 1e-12 of the largest of 1 and the largest single term of the log density. Each term
is rounded once (2e-16 of itself) and log gamma is good to about 1e-14, so 1e-12 leaves a factor
of a hundred; a lost term, a wrong constant or float32 arithmetic misses it by far.
"""

from __future__ import annotations

from collections.abc import Callable
from typing import Any

import mpmath
import numpy as np
import pytest
from scipy import integrate, stats

import steelyard as sy
from steelyard import densities
from steelyard.densities import Distribution

mpmath.mp.dps = 50
TOLERANCE = 1e-12
SEED = 20_261_210


def _normal(x: Any, mean: Any, sd: Any) -> list[Any]:
    return [-(((x - mean) / sd) ** 2) / 2, -mpmath.log(sd), -mpmath.log(2 * mpmath.pi) / 2]


def _half_normal(x: Any, scale: Any) -> list[Any]:
    return [-((x / scale) ** 2) / 2, -mpmath.log(scale), mpmath.log(2 / mpmath.pi) / 2]


def _half_cauchy(x: Any, scale: Any) -> list[Any]:
    return [mpmath.log(2 / mpmath.pi), -mpmath.log(scale), -mpmath.log1p((x / scale) ** 2)]


def _student_t(x: Any, df: Any, location: Any, scale: Any) -> list[Any]:
    z = (x - location) / scale
    return [
        mpmath.loggamma((df + 1) / 2),
        -mpmath.loggamma(df / 2),
        -mpmath.log(df * mpmath.pi) / 2,
        -mpmath.log(scale),
        -(df + 1) / 2 * mpmath.log1p(z**2 / df),
    ]


def _gamma(x: Any, shape: Any, rate: Any) -> list[Any]:
    return [
        shape * mpmath.log(rate),
        -mpmath.loggamma(shape),
        (shape - 1) * mpmath.log(x),
        -rate * x,
    ]


def _beta(x: Any, a: Any, b: Any) -> list[Any]:
    return [
        (a - 1) * mpmath.log(x),
        (b - 1) * mpmath.log1p(-x),
        -mpmath.loggamma(a),
        -mpmath.loggamma(b),
        mpmath.loggamma(a + b),
    ]


def _flat(x: Any, lower: Any, upper: Any) -> list[Any]:
    return [-mpmath.log(upper - lower)]


def _positive(rng: np.random.Generator) -> float:
    return float(np.exp(rng.normal(0, 1.5)))


def _real(rng: np.random.Generator) -> float:
    return float(3 * rng.standard_t(2))


def _inside(rng: np.random.Generator) -> float:
    return float(rng.beta(0.5, 0.5))


def _span(rng: np.random.Generator) -> tuple[float, float]:
    low = _real(rng)
    return low, low + _positive(rng)


Case = tuple[Callable[..., list[Any]], Callable[[np.random.Generator], tuple[Any, ...]], Any]

# For each distribution: terms of its log density, random arguments (value last), scipy's own.
CASES: dict[type[Distribution], Case] = {
    sy.Normal: (
        _normal,
        lambda r: (_real(r), _positive(r), _real(r)),
        lambda m, s: stats.norm(m, s),
    ),
    sy.HalfNormal: (
        _half_normal,
        lambda r: (_positive(r), _positive(r)),
        lambda s: stats.halfnorm(0, s),
    ),
    sy.HalfCauchy: (
        _half_cauchy,
        lambda r: (_positive(r), _positive(r)),
        lambda s: stats.halfcauchy(0, s),
    ),
    sy.StudentT: (
        _student_t,
        lambda r: (3 * _positive(r), _real(r), _positive(r), _real(r)),
        lambda df, m, s: stats.t(df, m, s),
    ),
    sy.Gamma: (
        _gamma,
        lambda r: (_positive(r), _positive(r), _positive(r)),
        lambda a, b: stats.gamma(a, scale=1 / b),
    ),
    sy.Beta: (
        _beta,
        lambda r: (_positive(r), _positive(r), _inside(r)),
        lambda a, b: stats.beta(a, b),
    ),
    sy.Flat: (
        _flat,
        lambda r: (lambda low, high: (low, high, 0.5 * (low + high)))(*_span(r)),
        lambda low, high: stats.uniform(low, high - low),
    ),
}
FAMILIES = pytest.mark.parametrize("family", CASES, ids=lambda f: f.__name__)


def test_the_first_distributions_are_still_there() -> None:
    # The others have their references in tests/densities.
    stated = {getattr(densities, name) for name in densities.__all__} - {Distribution}
    assert set(CASES) < stated


@FAMILIES
def test_log_density_agrees_with_fifty_digit_arithmetic(family: type[Distribution]) -> None:
    terms_of, arguments_of, _ = CASES[family]
    rng = np.random.default_rng(SEED)
    for _ in range(200):
        *hyper, value = arguments_of(rng)
        terms = terms_of(mpmath.mpf(value), *map(mpmath.mpf, hyper))
        size = max(1.0, *(abs(float(t)) for t in terms))
        exact = float(mpmath.fsum(terms))
        got = float(family(*hyper).log_density(value))
        assert abs(got - exact) <= TOLERANCE * size, (family(*hyper), value, got, exact)


@FAMILIES
def test_log_density_agrees_with_scipy(family: type[Distribution]) -> None:
    # 1e-10 of the value: scipy's own logpdf of beta and t loses some digits at such arguments.
    _, arguments_of, frozen = CASES[family]
    rng = np.random.default_rng(SEED + 1)
    for _ in range(200):
        *hyper, value = arguments_of(rng)
        want = float(frozen(*hyper).logpdf(value))
        got = float(family(*hyper).log_density(value))
        assert got == pytest.approx(want, rel=1e-10, abs=1e-10), (family(*hyper), value)


@pytest.mark.parametrize(
    ("distribution", "lower", "upper"),
    [
        (sy.Normal(-1, 0.7), -np.inf, np.inf),
        (sy.HalfNormal(0.4), 0, np.inf),
        (sy.HalfCauchy(2.5), 0, np.inf),
        (sy.StudentT(1.5, 2, 3), -np.inf, np.inf),
        (sy.Gamma(2.5, 4), 0, np.inf),
        (sy.Beta(2.5, 1.5), 0, 1),
        (sy.Flat(-2, 5), -2, 5),
    ],
    ids=str,
)
def test_density_integrates_to_one(distribution: Distribution, lower: float, upper: float) -> None:
    # 1e-7: what adaptive quadrature is asked for, with a factor of ten.
    total, _ = integrate.quad(
        lambda x: float(np.exp(distribution.log_density(x))), lower, upper, epsabs=1e-8
    )
    assert total == pytest.approx(1, abs=1e-7)


@pytest.mark.parametrize(
    ("distribution", "outside"),
    [
        (sy.HalfNormal(1), [-1e-300, -3.0, -np.inf]),
        (sy.HalfCauchy(1), [-1e-300, -3.0, -np.inf]),
        (sy.Gamma(2, 1), [-1e-300, -3.0, -np.inf]),
        (sy.Beta(2, 3), [-1e-300, 1 + 1e-15, 7.0]),
        (sy.Flat(1, 2), [1 - 1e-15, 2 + 1e-15, np.inf]),
    ],
    ids=str,
)
def test_outside_the_support_the_log_density_is_minus_infinity(
    distribution: Distribution, outside: list[float]
) -> None:
    assert np.all(distribution.log_density(outside) == -np.inf)


@pytest.mark.parametrize(
    ("distribution", "edge", "want"),
    [
        (sy.HalfNormal(2), 0.0, np.log(2 / (2 * np.sqrt(2 * np.pi)))),
        (sy.HalfCauchy(2), 0.0, np.log(1 / np.pi)),
        (sy.Gamma(1, 3), 0.0, np.log(3)),
        (sy.Gamma(2, 3), 0.0, -np.inf),
        (sy.Gamma(0.5, 3), 0.0, np.inf),
        (sy.Beta(1, 1), 0.0, 0.0),
        (sy.Beta(1, 1), 1.0, 0.0),
        (sy.Beta(1, 3), 1.0, -np.inf),
        (sy.Flat(0, 4), 0.0, -np.log(4)),
        (sy.Flat(0, 4), 4.0, -np.log(4)),
    ],
    ids=str,
)
def test_at_an_edge_of_the_support_the_log_density_is_its_limit(
    distribution: Distribution, edge: float, want: float
) -> None:
    # 1e-14: a logarithm and a product.
    assert float(distribution.log_density(edge)) == pytest.approx(want, abs=1e-14)


@pytest.mark.parametrize(
    ("distribution", "value"),
    [
        (sy.HalfCauchy(1e-3), 1e200),
        (sy.StudentT(3, 0, 1), 1e200),
        (sy.StudentT(3, 0, 1), -1e160),
        (sy.StudentT(1e-3, 5, 1e-2), 1e120),
    ],
    ids=str,
)
def test_heavy_tails_do_not_overflow(distribution: Distribution, value: float) -> None:
    terms_of, _, _ = CASES[type(distribution)]
    hyper = [getattr(distribution, name) for name in distribution.domains]
    exact = float(mpmath.fsum(terms_of(mpmath.mpf(value), *map(mpmath.mpf, hyper))))
    assert float(distribution.log_density(value)) == pytest.approx(exact, rel=TOLERANCE)


@pytest.mark.parametrize(
    ("distribution", "value"),
    [(sy.Beta(1e6, 2e6), 0.3333), (sy.Gamma(1e8, 1e8), 1.0001), (sy.Gamma(1e-6, 2), 1e-8)],
    ids=str,
)
def test_large_hyperparameters_lose_no_more_than_their_terms(
    distribution: Distribution, value: float
) -> None:
    # Terms of 1e9 are each rounded at 2e-16 of themselves, also by scipy: four such roundings.
    terms_of, _, _ = CASES[type(distribution)]
    hyper = [getattr(distribution, name) for name in distribution.domains]
    terms = terms_of(mpmath.mpf(value), *map(mpmath.mpf, hyper))
    allowed = 4 * np.finfo(float).eps * max(1.0, *(abs(float(t)) for t in terms))
    exact = float(mpmath.fsum(terms))
    assert float(distribution.log_density(value)) == pytest.approx(exact, abs=allowed)


@pytest.mark.parametrize("df", [1e3, 1e6, 1e9])
def test_a_student_t_of_many_degrees_of_freedom_keeps_nine_digits(df: float) -> None:
    # Nothing in this density is large but two log gammas that nearly cancel; 1e-9 on the log
    # scale is nine digits of it.
    exact = float(mpmath.fsum(_student_t(mpmath.mpf(0.3), mpmath.mpf(df), 0, mpmath.mpf(1))))
    assert float(sy.StudentT(df, 0, 1).log_density(0.3)) == pytest.approx(exact, abs=1e-9)


def test_an_improper_flat_density_has_log_density_zero() -> None:
    for flat in (sy.Flat(), sy.Flat(0), sy.Flat(upper=3)):
        assert not flat.is_proper
        assert float(flat.log_density(1.5)) == 0.0


def test_hyperparameters_broadcast_against_trailing_axes() -> None:
    x = np.random.default_rng(SEED + 3).normal(size=(50, 3))
    mean, sd = np.array([0.0, 1.0, 2.0]), np.array([1.0, 2.0, 0.5])
    got = sy.Normal(mean, sd).log_density(x)
    # 1e-13: two implementations of the same three terms.
    np.testing.assert_allclose(got, stats.norm(mean, sd).logpdf(x), rtol=1e-13, atol=1e-13)


def test_named_hyperparameters_are_taken_draw_by_draw() -> None:
    rng = np.random.default_rng(SEED + 4)
    mu, tau = rng.normal(size=60), rng.gamma(2, size=60)
    rate = rng.normal(size=(60, 5))
    got = sy.Normal("mu", "tau").log_density(rate, {"mu": mu, "tau": tau})
    want = stats.norm(mu[:, None], tau[:, None]).logpdf(rate)
    np.testing.assert_allclose(got, want, rtol=1e-13, atol=1e-13)


def test_a_nan_value_has_a_nan_log_density() -> None:
    for distribution in (sy.Normal(0, 1), sy.Gamma(1, 1), sy.Beta(1, 1), sy.Flat(0, 1)):
        assert np.isnan(distribution.log_density(np.nan))
