"""Truncated distributions: mass, slopes of the mass, far and close limits, what is refused."""

from __future__ import annotations

import itertools

import mpmath as mp
import numpy as np
import pytest
from scipy import stats

import steelyard as sy
from densities.reference import BY_MAKE, CASES, Case, draw, exact
from steelyard.densities import Distribution
from steelyard.errors import ArgumentError, ArgumentTypeError, PriorError

SEED = 20_261_213
EACH = pytest.mark.parametrize("case", CASES, ids=lambda case: case.make.__name__)


def mass(case: Case, low: mp.mpf, high: mp.mpf, numbers: list[mp.mpf]) -> mp.mpf:
    """``P(low ≤ X ≤ high)`` in 60 digits, subtracted on the side where both parts are small."""
    if case.is_discrete:
        low, high = mp.ceil(low) - 1, mp.floor(high)
    below = [case.cdf(v, *numbers) if v >= 0 or not case.is_discrete else 0 for v in (low, high)]
    if below[1] < mp.mpf(1) / 2:
        return below[1] - below[0]
    above = [
        case.complement(v, *numbers) if v >= 0 or not case.is_discrete else 1 for v in (low, high)
    ]
    return above[0] - above[1]


def log_density(case: Case, value: float, low: float, high: float, numbers: list) -> mp.mpf:
    return case.log_density(exact(value), *numbers) - mp.log(
        mass(case, exact(low), exact(high), numbers)
    )


def intervals(case: Case, count: int, seed: int) -> list[tuple[tuple, float, float, float]]:
    """Hyperparameters, limits around two random values, and a value between them."""
    out = []
    pairs = draw(case, seed, 3 * count)
    rng = np.random.default_rng(seed)
    for hyper, first in pairs:
        second = case.value(rng, *hyper)
        low, high = min(first, second), max(first, second)
        if high - low > 1e-6 * abs(high):
            share = float(rng.uniform(0.2, 0.8))
            value = low if case.is_discrete else low + share * (high - low)
            out.append((hyper, low, high, value))
    return out[:count]


@EACH
def test_log_density_is_that_of_the_whole_over_the_mass(case: Case) -> None:
    count = 8 if case.make is sy.SkewNormal else 25  # its reference is a slow quadrature
    for hyper, low, high, value in intervals(case, count, SEED):
        want = float(log_density(case, value, low, high, [exact(h) for h in hyper]))
        got = float(sy.Truncated(case.make(*hyper), low, high).log_density(value))
        # 1e-12, and the last bit of a limit: it moves the mass by its density times 1e-16 of the
        # limit, most where the limits are far from 0 and close to each other.
        allowed = 1e-12 * max(1.0, abs(want)) + 4e-16 * (abs(low) + abs(high)) / (high - low)
        assert abs(got - want) <= allowed, (hyper, low, high, value)


@EACH
def test_slopes_are_those_of_the_whole_less_those_of_the_mass(case: Case) -> None:
    step = mp.mpf(10) ** -20
    count = 3 if case.make is sy.SkewNormal else 12  # its reference is a slow quadrature
    for hyper, low, high, value in intervals(case, count, SEED + 1):
        numbers = [exact(h) for h in hyper]
        got = sy.Truncated(case.make(*hyper), low, high).hyper_gradient(value)
        for index, name in enumerate(case.make.domains):
            around = [
                [*numbers[:index], numbers[index] * (1 + sign * step), *numbers[index + 1 :]]
                for sign in (1, -1)
            ]
            ends = [log_density(case, value, low, high, h) for h in around]
            want = float((ends[0] - ends[1]) / (2 * step * numbers[index]))
            # The slope is a difference of terms of the size of 1/h and of the densities at the
            # limits, over the mass; each is good to 1e-12.
            size = max(
                1.0, abs(want), 1 / abs(hyper[index]), *edge_densities(case, hyper, low, high)
            )
            size *= 1 + abs(float(ends[0]))
            assert abs(float(got[f"d.{name}"]) - want) <= 1e-12 * size, (hyper, low, high, name)


def edge_densities(case: Case, hyper: tuple, low: float, high: float) -> list[float]:
    numbers = [exact(h) for h in hyper]
    whole = mp.log(mass(case, exact(low), exact(high), numbers))
    out = []
    for limit in (low, high):
        density = float(mp.exp(case.log_density(exact(limit), *numbers) - whole))
        out.append(density * max(1.0, abs(limit)) / min(1.0, *(abs(h) for h in hyper)))
    return out


@pytest.mark.parametrize(
    "make", [sy.Normal, sy.Gamma, sy.StudentT, sy.Beta, sy.Laplace], ids=lambda m: m.__name__
)
def test_slopes_in_the_limits_are_the_densities_there_over_the_mass(
    make: type[Distribution],
) -> None:
    case, step = BY_MAKE[make], mp.mpf(10) ** -20
    for hyper, low, high, value in intervals(case, 10, SEED + 2):
        numbers = [exact(h) for h in hyper]
        got = sy.Truncated(make(*hyper), low, high).hyper_gradient(value)
        for index, name in enumerate(("lower", "upper")):
            logs = []
            for sign in (1, -1):
                ends = [exact(low), exact(high)]
                ends[index] += sign * step
                logs.append(-mp.log(mass(case, *ends, numbers)))
            want = float((logs[0] - logs[1]) / (2 * step))
            # A density over a mass, each good to 1e-12 where the limits are not close.
            assert float(got[name]) == pytest.approx(want, rel=1e-10), (hyper, low, high)


FAR = [
    (sy.Normal(0, 1), 30.0, np.inf, 30.5),
    (sy.Normal(0, 1), -50.0, -49.0, -49.5),
    (sy.Normal(0, 1), 1e5, np.inf, 1e5 + 1e-6),
    (sy.HalfNormal(1), 0.0, 1e-8, 1e-9),
    (sy.LogNormal(0, 1), 1e12, np.inf, 2e12),
    (sy.StudentT(3, 0, 1), 1e10, np.inf, 3e10),
    (sy.StudentT(3, 0, 1), -1e10, -1e9, -3e9),
    (sy.HalfStudentT(2, 1), 1e-10, 1e-9, 3e-10),
    (sy.Cauchy(0, 1), -np.inf, -1e12, -3e12),
    (sy.HalfCauchy(1), 1e12, np.inf, 3e12),
    (sy.Logistic(0, 1), 600.0, np.inf, 601.0),
    (sy.Gumbel(0, 1), 800.0, np.inf, 801.0),
    (sy.Gumbel(0, 1), -np.inf, -6.0, -6.1),
    (sy.Laplace(0, 1), 900.0, np.inf, 901.0),
    (sy.Exponential(1), 1000.0, np.inf, 1001.0),
    (sy.Gamma(3, 2), 500.0, np.inf, 501.0),
    (sy.Gamma(0.001, 0.001), 10.0, np.inf, 11.0),
    (sy.Gamma(200, 2), 0.0, 1.0, 0.99),
    (sy.InverseGamma(3, 2), 1e-6, 1e-3, 9e-4),
    (sy.InverseGamma(0.001, 0.001), 0.1, np.inf, 0.2),
    (sy.Beta(2, 300), 0.9, 1.0, 0.91),
    (sy.Beta(0.01, 5), 0.5, 1.0, 0.6),
    (sy.Weibull(2, 1), 30.0, np.inf, 30.5),
    (sy.Pareto(2, 1), 1e100, np.inf, 2e100),
    (sy.SkewNormal(0, 1, 5), -np.inf, -5.0, -5.1),
    (sy.Poisson(3), 100.0, np.inf, 101.0),
    (sy.Poisson(300), 0.0, 20.0, 19.0),
    (sy.Binomial(50, 0.01), 30.0, 50.0, 31.0),
    (sy.NegativeBinomial(3, 2), 400.0, np.inf, 401.0),
]


@pytest.mark.parametrize(("inner", "low", "high", "value"), FAR, ids=str)
def test_far_limits_keep_their_digits(
    inner: Distribution, low: float, high: float, value: float
) -> None:
    case = BY_MAKE[type(inner)]
    numbers = [exact(getattr(inner, name)) for name in inner.domains]
    # Masses down to e^(−1000) are subtracted from 1; the quadrature of the skew-normal, e^(−325).
    with mp.workdps(220 if case.make is sy.SkewNormal else 500):
        whole = 1 if np.isinf(high) else case.cdf(exact(high), *numbers)
        if np.isinf(low):
            held = whole
        elif np.isinf(high):
            at = exact(low) - 1 if case.is_discrete else exact(low)
            held = case.complement(at, *numbers)
        else:
            held = mass(case, exact(low), exact(high), numbers)
        want = float(case.log_density(exact(value), *numbers) - mp.log(held))
    got = float(sy.Truncated(inner, low, high).log_density(value))
    # The log density of the whole is up to 5e9 here, and its digits are those of the result.
    size = max(1.0, abs(float(inner.log_density(value))))
    assert got == pytest.approx(want, abs=2e-12 * size)


CLOSE = [
    (sy.Normal(0, 1), 0.5),
    (sy.Normal(0, 1), -7.0),
    (sy.StudentT(4, 0, 1), 1.5),
    (sy.Gamma(0.5, 1), 1e-3),
    (sy.Beta(0.5, 0.5), 0.999),
    (sy.SkewNormal(0, 1, -3), -0.5),
    (sy.Laplace(0, 1), -1e-12),
    (sy.Gumbel(0, 1), 2.0),
]


@pytest.mark.parametrize("width", [1e-3, 1e-9])
@pytest.mark.parametrize(("inner", "low"), CLOSE, ids=str)
def test_close_limits_keep_their_digits(inner: Distribution, low: float, width: float) -> None:
    # Two distribution functions that close would share all but a few digits.
    case, high = BY_MAKE[type(inner)], low + width * abs(low) + width * 1e-3
    numbers = [exact(getattr(inner, name)) for name in inner.domains]
    want = float(log_density(case, (low + high) / 2, low, high, numbers))
    got = float(sy.Truncated(inner, low, high).log_density((low + high) / 2))
    # The midpoint and the width are rounded themselves: the last bit of the limit in the width.
    assert got == pytest.approx(want, abs=1e-12 + 4e-16 * abs(low) / (high - low))


def test_counts_between_close_limits_are_summed() -> None:
    got = sy.Truncated(sy.Poisson(1e6), 1e6 - 2, 1e6 + 2).log_density(np.arange(1e6 - 3, 1e6 + 4))
    assert np.isinf(got[[0, -1]]).all()
    assert np.exp(got).sum() == pytest.approx(1, abs=1e-13)
    one = sy.Truncated(sy.Poisson(4), 2.5, 3.5)
    assert float(one.log_density(3.0)) == pytest.approx(0, abs=1e-14)
    assert [float(v) for v in one.support()] == [3.0, 3.0]


def test_named_limits_and_hyperparameters_keep_their_part_in_the_mass() -> None:
    rng = np.random.default_rng(SEED)
    draws = {"mu": rng.normal(size=40), "top": rng.uniform(1, 3, size=40)}
    distribution = sy.Truncated(sy.Normal("mu", 1), -1, "top")
    assert distribution.names == ("mu", "top")
    value = rng.uniform(-1, 1, size=(40, 3))
    got = distribution.log_density(value, draws)
    for draw_, column in itertools.product(range(40), range(3)):
        alone = sy.Truncated(sy.Normal(draws["mu"][draw_], 1), -1, draws["top"][draw_])
        assert got[draw_, column] == pytest.approx(
            float(alone.log_density(value[draw_, column])), abs=1e-13
        )
    # The same through scipy, whose tails are good to 1e-13 here.
    mu, top = draws["mu"][:, None], draws["top"][:, None]
    want = stats.truncnorm(-1 - mu, top - mu, mu, 1).logpdf(value)
    np.testing.assert_allclose(got, want, rtol=1e-12, atol=1e-12)


def test_an_improper_truncation_stays_improper_and_unnormalised() -> None:
    open_above = sy.Truncated(sy.Flat(), lower=0)
    assert not open_above.is_proper
    assert float(open_above.log_density(5.0)) == 0.0
    with pytest.raises(ArgumentError, match="sample: expected a proper density"):
        open_above.sample(3, rng=1)


def test_a_truncation_that_cuts_nothing_changes_nothing() -> None:
    whole = sy.Gamma(2, 1)
    for cut in (sy.Truncated(whole), sy.Truncated(whole, -3), sy.Truncated(whole, 0)):
        x = np.linspace(0.1, 9, 20)
        np.testing.assert_array_equal(cut.log_density(x), whole.log_density(x))
        np.testing.assert_array_equal(
            cut.hyper_gradient(x)["d.shape"], whole.hyper_gradient(x)["shape"]
        )


@pytest.mark.parametrize(
    ("arguments", "error", "words"),
    [
        ((sy.Normal(0, 1), 2, 1), ArgumentError, "upper: expected a limit above lower=2.0; got 1"),
        ((sy.Normal(0, 1), np.nan, 1), ArgumentError, "lower: expected a number, or an infinite"),
        ((sy.HalfNormal(1), -2, -1), ArgumentError, "limits that hold some of the mass of HalfNo"),
        ((sy.Poisson(2), 1.2, 1.8), ArgumentError, "limits that hold some of the mass of Poisson"),
        ((sy.Dirichlet([1, 2]), 0, 1), ArgumentError, "d: expected a distribution of single numb"),
        ((sy.Mixture([1], [sy.Dirichlet(1)]), 0, 1), ArgumentError, "a distribution of single"),
        ((3.0, 0, 1), ArgumentTypeError, "d: expected a distribution; got float"),
    ],
)
def test_bad_truncations_are_refused(arguments: tuple, error: type, words: str) -> None:
    with pytest.raises(error, match="Truncated") as caught:
        sy.Truncated(*arguments)
    assert words in str(caught.value)


def test_named_limits_in_the_wrong_order_are_refused() -> None:
    distribution = sy.Truncated(sy.Normal(0, 1), "low", "top")
    draws = {"low": np.array([0.0, 2.0]), "top": np.array([1.0, 1.0])}
    with pytest.raises(PriorError, match="in which lower is below upper; got 1"):
        distribution.log_density(np.zeros(2), draws)
