"""Text forms, equality, hashing, pickling, and hyperparameters that are refused."""

from __future__ import annotations

import pickle

import numpy as np
import pytest
from hypothesis import given, settings
from hypothesis import strategies as st

import steelyard as sy
from densities.reference import CASES, Case, draw
from steelyard import densities
from steelyard.densities import Distribution
from steelyard.errors import ArgumentError, ArgumentTypeError, PriorError, ShapeError

SEED = 20_261_217
SOME: list[Distribution] = [
    *(case.make(*draw(case, SEED, 1)[0][0]) for case in CASES),
    sy.Normal("mu", "tau"),
    sy.Normal([0.0, 1.5], 0.1),
    sy.Normal([[0.0], [1.0]], "tau"),
    sy.Flat(),
    sy.Flat(0),
    sy.Flat(upper=3),
    sy.Flat([0, -np.inf], np.inf),
    sy.Dirichlet([1, 2, 3]),
    sy.MultivariateNormal("mu", [[1, 0.5], [0.5, 1]]),
    sy.LKJCorrelation(2),
    sy.Truncated(sy.Normal("mu", 1), lower=0),
    sy.Truncated(sy.Poisson(2), 1, 9),
    sy.Truncated(sy.Mixture([0.3, 0.7], [sy.Normal(0, 1), sy.Cauchy(0, 1)]), -1, "top"),
    sy.Mixture("w", [sy.Truncated(sy.Gamma(2, 1), 1, 4), sy.Uniform(0, 9)]),
]


@pytest.mark.parametrize("distribution", SOME, ids=str)
def test_the_source_form_reads_back(distribution: Distribution) -> None:
    assert eval(repr(distribution), vars(densities)) == distribution


@pytest.mark.parametrize("distribution", SOME, ids=str)
def test_copies_are_equal_and_hash_alike(distribution: Distribution) -> None:
    copy = pickle.loads(pickle.dumps(distribution))
    assert copy == distribution
    assert hash(copy) == hash(distribution)
    assert len({copy, distribution}) == 1
    assert distribution != sy.Normal(123, 4)


@settings(max_examples=200, deadline=None, derandomize=True)
@given(
    mean=st.floats(allow_nan=False, allow_infinity=False),
    sd=st.floats(min_value=0, exclude_min=True, allow_infinity=False),
)
def test_all_digits_of_a_number_are_kept_in_both_text_forms(mean: float, sd: float) -> None:
    distribution = sy.Normal(mean, sd)
    assert eval(repr(distribution), vars(densities)) == distribution
    assert str(distribution).startswith("Normal(")
    first, second = str(distribution)[len("Normal(") : -1].split(", ")
    assert (float(first), float(second)) == (mean, sd)


@pytest.mark.parametrize(
    ("distribution", "words", "source"),
    [
        (sy.Normal("mu", 0.1), "Normal(mu, 0.1)", "Normal(mean='mu', sd=0.1)"),
        (sy.Normal([0, 1], 2), "Normal([0, 1], 2)", "Normal(mean=(0.0, 1.0), sd=2.0)"),
        (sy.Flat(), "Flat(-inf, inf)", 'Flat(lower=float("-inf"), upper=float("inf"))'),
        (sy.Flat(0), "Flat(0, inf)", 'Flat(lower=0.0, upper=float("inf"))'),
        (sy.Flat(upper=3), "Flat(-inf, 3)", 'Flat(lower=float("-inf"), upper=3.0)'),
        (
            sy.Truncated(sy.Normal(0, "tau"), 0),
            "Truncated(Normal(0, tau), 0, inf)",
            "Truncated(d=Normal(mean=0.0, sd='tau'), lower=0.0, upper=float(\"inf\"))",
        ),
        (
            sy.Mixture([1], [sy.Poisson(2)]),
            "Mixture([1], [Poisson(2)])",
            "Mixture(weights=(1.0,), components=(Poisson(rate=2.0),))",
        ),
    ],
)
def test_text_forms(distribution: Distribution, words: str, source: str) -> None:
    assert str(distribution) == words
    assert repr(distribution) == source


def test_names_of_parameters_are_listed_parts_first() -> None:
    assert SOME[-2].names == ("top",)
    assert SOME[-1].names == ("w",)
    nested = sy.Truncated(sy.Mixture("w", [sy.Normal("mu", "tau"), sy.Cauchy(0, "s")]), "low", 9)
    assert nested.names == ("mu", "tau", "s", "w", "low")


BAD = {
    "real": [np.nan, np.inf, -np.inf],
    "positive": [0, -1.0, np.nan, np.inf],
    "limit": [np.nan],
    "share": [-0.1, 1.1, np.nan],
    "count": [-1, 2.5, np.nan, np.inf],
}


@pytest.mark.parametrize("case", CASES, ids=lambda case: case.make.__name__)
def test_hyperparameters_outside_their_range_are_refused(case: Case) -> None:
    hyper = list(draw(case, SEED + 1, 1)[0][0])
    for index, (name, domain) in enumerate(case.make.domains.items()):
        for bad in BAD[domain]:
            for value in (bad, [hyper[index], bad]):
                arguments = [*hyper[:index], value, *hyper[index + 1 :]]
                with pytest.raises(ArgumentError) as caught:
                    case.make(*arguments)
                assert caught.value.argument == f"{case.make.__name__}: {name}"
                assert f"{bad:g}" in caught.value.came


@pytest.mark.parametrize("case", CASES, ids=lambda case: case.make.__name__)
def test_hyperparameters_of_another_kind_are_refused(case: Case) -> None:
    hyper = list(draw(case, SEED + 2, 1)[0][0])
    for index, name in enumerate(case.make.domains):
        for bad in (None, True, 1j, [True], ["mu"], object(), {"a": 1}):
            arguments = [*hyper[:index], bad, *hyper[index + 1 :]]
            with pytest.raises(ArgumentTypeError, match="the name of a parameter") as caught:
                case.make(*arguments)
            assert caught.value.argument == f"{case.make.__name__}: {name}"


@pytest.mark.parametrize("case", CASES, ids=lambda case: case.make.__name__)
def test_ragged_and_empty_hyperparameters_are_refused(case: Case) -> None:
    hyper = list(draw(case, SEED + 3, 1)[0][0])
    for index in range(len(hyper)):
        for bad, words in [([[1], [1, 2]], "got a ragged list"), ([], r"got shape \(0,\)")]:
            with pytest.raises(ShapeError, match=words):
                case.make(*hyper[:index], bad, *hyper[index + 1 :])


@pytest.mark.parametrize("make", [sy.Flat, sy.Uniform])
def test_limits_in_the_wrong_order_are_refused(make: type[Distribution]) -> None:
    for lower, upper in [(2, 1), (1, 1), ([0, 3], [1, 2])]:
        with pytest.raises(ArgumentError, match="upper: expected a limit above lower="):
            make(lower, upper)
    distribution = make("low", 1)
    with pytest.raises(
        PriorError, match="draws of the limits in which lower is below upper; got 2"
    ):
        distribution.log_density(np.zeros(3), {"low": np.array([0.0, 1.0, 2.0])})


def test_missing_and_bad_draws_of_named_hyperparameters_are_refused() -> None:
    distribution = sy.Normal("mu", "tau")
    value, mu = np.zeros((4, 2)), np.zeros(4)
    with pytest.raises(PriorError, match="draws of the parameter 'mu'; got none"):
        distribution.log_density(value)
    with pytest.raises(PriorError, match="draws of the parameter 'tau'; got draws of mu"):
        distribution.gradient(value, {"mu": mu})
    with pytest.raises(
        PriorError, match=r"'tau' that are each a positive .* 1 that are not, first"
    ):
        distribution.hyper_gradient(value, {"mu": mu, "tau": np.array([1.0, 2.0, 0.0, 1.0])})
    with pytest.raises(ShapeError, match=r"broadcast against a parameter of shape \(4, 2\)"):
        distribution.log_density(value, {"mu": mu, "tau": np.ones(3)})
    with pytest.raises(ShapeError, match=r"broadcast against a parameter of shape \(4, 2\)"):
        distribution.log_density(value, {"mu": mu, "tau": np.ones((4, 2, 2))})
    with pytest.raises(
        ShapeError, match="hyperparameters that broadcast against the value's shape"
    ):
        sy.Normal([0, 1, 2], 1).log_density(value)


def test_distributions_are_frozen() -> None:
    with pytest.raises(AttributeError):
        sy.Normal(0, 1).mean = 3  # type: ignore[misc]
