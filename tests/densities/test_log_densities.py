"""Log densities against 60-digit arithmetic and scipy, far out, at edges, and off whole numbers.

Tolerance, where nothing else is said: 1e-12 of the larger of 1 and the log density. What is left
are a few roundings of single terms, at most some 1e-14; a lost constant, a cancellation or float32
arithmetic misses it by far.
"""

from __future__ import annotations

import mpmath as mp
import numpy as np
import pytest
from hypothesis import given, settings
from hypothesis import strategies as st
from scipy import stats

import steelyard as sy
from densities.reference import CASES, Case, draw, exact
from steelyard import densities
from steelyard.densities import Distribution

TOLERANCE = 1e-12
SEED = 20_261_211
EACH = pytest.mark.parametrize("case", CASES, ids=lambda case: case.make.__name__)

VECTORS = {sy.Dirichlet, sy.MultivariateNormal, sy.LKJCorrelation}
COMPOSED = {sy.Truncated, sy.Mixture, sy.Flat}


def assert_close(got: float, want: mp.mpf, what: object) -> None:
    want = float(want)
    assert abs(got - want) <= TOLERANCE * max(1.0, abs(want)), (what, got, want)


def test_every_distribution_has_a_reference_in_these_tests() -> None:
    stated = {getattr(densities, name) for name in densities.__all__} - {Distribution}
    assert stated == {case.make for case in CASES} | VECTORS | COMPOSED


@EACH
def test_log_density_agrees_with_sixty_digit_arithmetic(case: Case) -> None:
    for hyper, value in draw(case, SEED, 150):
        want = case.log_density(exact(value), *map(exact, hyper))
        assert_close(float(case.make(*hyper).log_density(value)), want, (hyper, value))


@EACH
def test_log_density_agrees_with_scipy(case: Case) -> None:
    # 1e-9: scipy's own log densities of t, beta and counts lose digits at such arguments.
    if case.make is sy.HalfStudentT:
        pairs = [(h, v, np.log(2) + stats.t(h[0], 0, h[1]).logpdf(v)) for h, v in draw(case, 1, 60)]
    else:
        log = "logpmf" if case.is_discrete else "logpdf"
        pairs = [(h, v, getattr(case.scipy(*h), log)(v)) for h, v in draw(case, SEED + 1, 60)]
    for hyper, value, want in pairs:
        got = float(case.make(*hyper).log_density(value))
        assert got == pytest.approx(float(want), rel=1e-9, abs=1e-9), (hyper, value)


@EACH
def test_an_array_has_the_bits_of_its_single_entries(case: Case) -> None:
    hyper, _ = draw(case, SEED + 2, 1)[0]
    rng = np.random.default_rng(SEED + 2)
    values = np.array([case.value(rng, *hyper) for _ in range(300)] + [-1.5, 0.0, np.nan, np.inf])
    distribution = case.make(*hyper)
    alone = [float(distribution.log_density(v)) for v in values]
    np.testing.assert_array_equal(distribution.log_density(values), alone)


FAR = [
    (sy.Normal(0, 1), [1e8, -1e154]),
    (sy.Normal(1e8, 1e-8), [1e8 + 1e-7]),
    (sy.StudentT(3, 0, 1), [1e120, -1e200, 1e300]),
    (sy.StudentT(1e-3, 5, 1e-2), [1e120]),
    (sy.HalfStudentT(2, 1e-5), [1e290]),
    (sy.Cauchy(0, 1e-3), [1e200, -1e-200]),
    (sy.HalfCauchy(1e-3), [1e200, 1e-300]),
    (sy.Laplace(0, 1e-3), [1e9]),
    (sy.Logistic(0, 1), [700.0, -800.0, 1e5]),
    (sy.Gumbel(0, 1), [800.0, -5.0]),
    (sy.SkewNormal(0, 1, 4), [-30.0, -1e3, 50.0]),
    (sy.SkewNormal(0, 1, -1e3), [3.0, 1e-5]),
    (sy.LogNormal(0, 1), [1e-300, 1e300]),
    (sy.LogNormal(-700, 1), [5e-324, 1e-310]),
    (sy.Exponential(1e-3), [1e8]),
    (sy.Gamma(0.01, 2), [1e-300, 1e6]),
    (sy.Gamma(5, 1e-200), [1e200, 1e-200]),
    (sy.InverseGamma(3, 2), [1e-3, 1e300]),
    (sy.Beta(0.5, 3), [1e-300, 1 - 1e-15]),
    (sy.Weibull(0.3, 1), [1e-200, 1e9]),
    (sy.Pareto(2, 1), [1e300, 1 + 1e-15]),
    (sy.Poisson(3), [1e6, 200.0]),
    (sy.Poisson(1e-5), [7.0]),
    (sy.Binomial(1000, 1e-4), [1000.0, 900.0]),
    (sy.NegativeBinomial(1e-3, 2), [400.0]),
]


@pytest.mark.parametrize(("distribution", "values"), FAR, ids=str)
def test_far_tails_keep_their_digits(distribution: Distribution, values: list[float]) -> None:
    case = next(c for c in CASES if c.make is type(distribution))
    hyper = [exact(getattr(distribution, name)) for name in distribution.domains]
    for value in values:
        want = case.log_density(exact(value), *hyper)
        assert_close(float(distribution.log_density(value)), want, value)


LARGE = [
    (sy.Gamma(1e8, 1e8), [1.0001, 0.9999999, 1.0]),
    (sy.Gamma(1e10, 3.0), [3.33334e9]),
    (sy.InverseGamma(1e8, 1e8), [1.0001]),
    (sy.Beta(1e6, 2e6), [0.3333, 1 / 3]),
    (sy.Beta(1e9, 3), [1 - 1e-9, 1 - 5e-9]),
    (sy.StudentT(1e9, 0, 1), [0.3, 5.0]),
    (sy.StudentT(1e15, 0, 1), [0.3, 5.0]),
    (sy.Pareto(1e6, 2.0), [2.000001]),
    (sy.Poisson(1e9), [1e9, 1e9 + 3e4]),
    (sy.Binomial(1e9, 0.3), [3e8, 3e8 + 20_000]),
    (sy.NegativeBinomial(5, 1e9), [4.0, 11.0]),
    (sy.NegativeBinomial(1e6, 1e7), [1e6, 1.001e6]),
]


@pytest.mark.parametrize(("distribution", "values"), LARGE, ids=str)
def test_large_hyperparameters_do_not_cancel(
    distribution: Distribution, values: list[float]
) -> None:
    # 1e-11: a value, its distance from the mean included, is good to 1e-16 of itself, and within a
    # few widths of the density that moves the log density by 1e-16 times the root of the shape,
    # 1e-11 at 1e10. The plain sum of terms, each up to 1e11, would be off by 1e-5.
    case = next(c for c in CASES if c.make is type(distribution))
    hyper = [exact(getattr(distribution, name)) for name in distribution.domains]
    for value in values:
        want = float(case.log_density(exact(value), *hyper))
        assert float(distribution.log_density(value)) == pytest.approx(want, rel=1e-11, abs=1e-11)


EDGES = [
    (sy.HalfNormal(2), 0.0, np.log(2 / (2 * np.sqrt(2 * np.pi)))),
    (sy.HalfCauchy(2), 0.0, -np.log(np.pi)),
    (sy.HalfStudentT(1, 2), 0.0, -np.log(np.pi)),
    (sy.Exponential(3), 0.0, np.log(3)),
    (sy.Gamma(1, 3), 0.0, np.log(3)),
    (sy.Gamma(2, 3), 0.0, -np.inf),
    (sy.Gamma(0.5, 3), 0.0, np.inf),
    (sy.InverseGamma(2, 3), 0.0, -np.inf),
    (sy.LogNormal(0, 1), 0.0, -np.inf),
    (sy.Weibull(1, 4), 0.0, -np.log(4)),
    (sy.Weibull(2, 4), 0.0, -np.inf),
    (sy.Weibull(0.5, 4), 0.0, np.inf),
    (sy.Pareto(3, 2), 2.0, np.log(1.5)),
    (sy.Beta(1, 1), 0.0, 0.0),
    (sy.Beta(1, 1), 1.0, 0.0),
    (sy.Beta(1, 3), 0.0, np.log(3)),
    (sy.Beta(1, 3), 1.0, -np.inf),
    (sy.Beta(0.5, 3), 0.0, np.inf),
    (sy.Flat(0, 4), 0.0, -np.log(4)),
    (sy.Uniform(0, 4), 4.0, -np.log(4)),
    (sy.Laplace(1, 2), 1.0, -np.log(4)),
    (sy.Binomial(3, 0), 0.0, 0.0),
    (sy.Binomial(3, 0), 1.0, -np.inf),
    (sy.Binomial(3, 1), 3.0, 0.0),
    (sy.Binomial(3, 1), 2.0, -np.inf),
    (sy.Binomial(0, 0.4), 0.0, 0.0),
    (sy.Poisson(2), 0.0, -2.0),
]


@pytest.mark.parametrize(("distribution", "edge", "want"), EDGES, ids=str)
def test_at_an_edge_the_log_density_is_its_limit(
    distribution: Distribution, edge: float, want: float
) -> None:
    # 1e-14: a logarithm and a product.
    assert float(distribution.log_density(edge)) == pytest.approx(want, abs=1e-14)


OUTSIDE = [
    (sy.HalfNormal(1), [-1e-300, -3.0]),
    (sy.HalfCauchy(1), [-1e-300, -3.0]),
    (sy.HalfStudentT(3, 1), [-1e-300, -3.0, -1e200]),
    (sy.Exponential(1), [-1e-300, -3.0]),
    (sy.LogNormal(0, 1), [-1e-300, -3.0]),
    (sy.Gamma(2, 1), [-1e-300, -3.0]),
    (sy.InverseGamma(2, 1), [-1e-300, -3.0]),
    (sy.Weibull(2, 1), [-1e-300, -3.0]),
    (sy.Beta(2, 3), [-1e-300, 1 + 1e-15, 7.0]),
    (sy.Pareto(2, 3), [3 - 1e-15, 0.0, -5.0]),
    (sy.Flat(1, 2), [1 - 1e-15, 2 + 1e-15]),
    (sy.Uniform(1, 2), [1 - 1e-15, 2 + 1e-15]),
    (sy.Poisson(2), [-1.0, 0.5, 1 + 1e-15, -1e-300]),
    (sy.Binomial(4, 0.5), [-1.0, 5.0, 2.5]),
    (sy.NegativeBinomial(2, 1), [-1.0, 0.5, 1e-300]),
]


@pytest.mark.parametrize(("distribution", "values"), OUTSIDE, ids=str)
def test_outside_the_support_and_off_whole_numbers_the_log_density_is_minus_infinity(
    distribution: Distribution, values: list[float]
) -> None:
    assert np.all(distribution.log_density(values) == -np.inf)


@EACH
def test_infinite_values_are_outside_and_nan_stays_nan(case: Case) -> None:
    distribution = case.make(*draw(case, SEED + 3, 1)[0][0])
    assert np.all(distribution.log_density([np.inf, -np.inf]) == -np.inf)
    assert np.isnan(distribution.log_density(np.nan))
    assert np.all(sy.Flat().log_density([np.inf, -np.inf]) == -np.inf)


@pytest.mark.parametrize("scale", [5e-324, 1e-310, 1e-305, 1e305, 1.7e308])
def test_scales_at_the_ends_of_the_range_of_numbers_work(scale: float) -> None:
    # These leave the fast loop, whose reciprocals would overflow.
    for case in CASES:
        if case.make not in (sy.Normal, sy.HalfNormal, sy.Cauchy, sy.Laplace, sy.Logistic):
            continue
        hyper = (scale,) if case.make is sy.HalfNormal else (0.0, scale)
        want = case.log_density(exact(scale), *map(exact, hyper))
        assert_close(float(case.make(*hyper).log_density(scale)), want, hyper)


def test_a_flat_density_may_be_as_wide_as_the_range_of_numbers() -> None:
    most = np.finfo(float).max
    want = -float(mp.log(2 * exact(most)))
    assert float(sy.Uniform(-most, most).log_density(0.0)) == pytest.approx(want, rel=1e-15)


@settings(max_examples=60, deadline=None, derandomize=True)
@given(
    shape=st.floats(1e-3, 1e6),
    rate=st.floats(1e-6, 1e6),
    share=st.floats(1e-6, 1e3),
)
def test_gamma_is_within_tolerance_anywhere(shape: float, rate: float, share: float) -> None:
    # The mean times a share: the value is rounded, so that its last bit, 1e-16, counts up to
    # shape·|1 − share| times.
    case = next(c for c in CASES if c.make is sy.Gamma)
    value = shape / rate * share
    want = float(case.log_density(exact(value), exact(shape), exact(rate)))
    got = float(sy.Gamma(shape, rate).log_density(value))
    assert got == pytest.approx(want, rel=TOLERANCE, abs=TOLERANCE)
