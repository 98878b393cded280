"""Gradients in the value and in each hyperparameter, against differentiation in 60 digits."""

from __future__ import annotations

import mpmath as mp
import numpy as np
import pytest

import steelyard as sy
from densities.reference import CASES, Case, draw, exact
from steelyard.densities import Distribution
from steelyard.errors import ArgumentError

SEED = 20_261_212
EACH = pytest.mark.parametrize("case", CASES, ids=lambda case: case.make.__name__)


def derivative(function: object, at: mp.mpf) -> mp.mpf:
    """Central difference with a step of 1e-20: its own error is 1e-40 of the third derivative."""
    step = mp.mpf(10) ** -20 * max(abs(at), mp.mpf(10) ** -20)
    return (function(at + step) - function(at - step)) / (2 * step)


def by_hand(case: Case, hyper: tuple[float, ...], value: float) -> dict[str, mp.mpf]:
    """Derivatives of the textbook form in every hyperparameter."""
    x, numbers = exact(value), [exact(h) for h in hyper]
    out = {}
    for index, name in enumerate(case.make.domains):

        def along(h: mp.mpf, index: int = index) -> mp.mpf:
            return case.log_density(x, *numbers[:index], h, *numbers[index + 1 :])

        out[name] = derivative(along, numbers[index])
    return out


@EACH
def test_gradient_in_each_hyperparameter_is_the_derivative(case: Case) -> None:
    for hyper, value in draw(case, SEED, 60):
        got = case.make(*hyper).hyper_gradient(value)
        assert list(got) == list(case.make.domains)
        for name, want in by_hand(case, hyper, value).items():
            # A derivative is a difference of terms of the size of (1 + log density)/h, each good
            # to some 1e-15: 1e-12 of that size.
            size = (1 + abs(float(case.log_density(exact(value), *map(exact, hyper))))) / abs(
                dict(zip(case.make.domains, hyper, strict=True))[name]
            )
            allowed = 1e-12 * max(1.0, abs(float(want)), size)
            assert abs(float(got[name]) - float(want)) <= allowed, (hyper, value, name)


@pytest.mark.parametrize(
    "case", [c for c in CASES if not c.is_discrete], ids=lambda case: case.make.__name__
)
def test_gradient_in_the_value_is_the_derivative(case: Case) -> None:
    for hyper, value in draw(case, SEED + 1, 60):
        numbers = [exact(h) for h in hyper]
        want = float(derivative(lambda x: case.log_density(x, *numbers), exact(value)))  # noqa: B023
        got = float(case.make(*hyper).gradient(value))
        # As above: the terms of a gradient are of the size of the density's width.
        width = max(abs(float(case.log_density(exact(value), *numbers))), 1.0) / abs(value)
        assert abs(got - want) <= 1e-12 * max(1.0, abs(want), width), (hyper, value)


@pytest.mark.parametrize(
    ("distribution", "value", "want"),
    [
        (sy.Gamma(1, 3), 0.0, -3.0),
        (sy.Gamma(2, 3), 1e-300, 1e300),
        (sy.Weibull(1, 4), 0.0, -0.25),
        (sy.Beta(1, 3), 0.0, -2.0),
        (sy.Beta(3, 1), 1.0, 2.0),
        (sy.HalfNormal(2), 0.0, 0.0),
        (sy.HalfCauchy(2), 0.0, 0.0),
        (sy.StudentT(3, 1, 2), 1.0, 0.0),
        (sy.Laplace(1, 2), 1.0, 0.0),
        (sy.Cauchy(0, 1), 1e200, -2e-200),
        (sy.StudentT(3, 0, 1), -1e200, 4e-200),
        (sy.SkewNormal(0, 1, 4), -1e5, 17e5),
        (sy.Flat(), 3.0, 0.0),
        (sy.Uniform(0, 1), 1.0, 0.0),
    ],
    ids=str,
)
def test_gradients_at_edges_and_far_out(
    distribution: Distribution, value: float, want: float
) -> None:
    # 1e-9: the last but one grows like 17 x, up to 1/x² beside it.
    assert float(distribution.gradient(value)) == pytest.approx(want, rel=1e-9)


def test_a_shape_exactly_one_has_finite_slopes_where_the_density_is_finite() -> None:
    assert np.isfinite(sy.Weibull(1, 2).hyper_gradient(1e-3)["shape"])
    assert float(sy.Exponential(2).hyper_gradient(0.0)["rate"]) == 0.5
    got = sy.Binomial(3, 0).hyper_gradient(0.0)
    assert (float(got["n"]), float(got["p"])) == (0.0, -3.0)


@EACH
def test_outside_the_support_there_is_no_gradient(case: Case) -> None:
    distribution = case.make(*draw(case, SEED + 2, 1)[0][0])
    if not case.is_discrete:
        assert np.isnan(distribution.gradient([np.nan, np.inf])).all()
    for slope in distribution.hyper_gradient([np.nan, -np.inf]).values():
        assert np.isnan(slope).all()


@pytest.mark.parametrize(
    "distribution",
    [
        sy.Poisson(2),
        sy.Truncated(sy.Poisson(2), 1),
        sy.Mixture([1.0], [sy.Binomial(3, 0.5)]),
    ],
    ids=str,
)
def test_counts_refuse_a_gradient_in_the_value(distribution: Distribution) -> None:
    with pytest.raises(ArgumentError, match=r"gradient: expected a continuous distribution; got"):
        distribution.gradient(1.0)


def test_the_flat_density_has_the_slopes_of_its_width() -> None:
    slopes = sy.Flat(1, 5).hyper_gradient(2.0)
    assert {name: float(v) for name, v in slopes.items()} == {"lower": 0.25, "upper": -0.25}
    slopes = sy.Flat(1).hyper_gradient(2.0)
    assert {name: float(v) for name, v in slopes.items()} == {"lower": 0.0, "upper": 0.0}
