"""Prior terms that cannot be what the draws came from, and distributions that are none."""

from __future__ import annotations

from typing import Any

import numpy as np
import pytest
from scipy import stats

import steelyard as sy
from steelyard.errors import (
    ArgumentError,
    ArgumentTypeError,
    PriorError,
    ShapeError,
    UnknownNameError,
)

from .telling import refused

Draws = dict[str, np.ndarray]
SCALES = [
    ("sd", lambda v: sy.Normal(0, v)),
    ("scale", lambda v: sy.HalfNormal(v)),
    ("scale", lambda v: sy.HalfCauchy(v)),
    ("scale", lambda v: sy.StudentT(3, 0, v)),
    ("df", lambda v: sy.StudentT(v, 0, 1)),
    ("shape", lambda v: sy.Gamma(v, 1)),
    ("rate", lambda v: sy.Gamma(1, v)),
    ("a", lambda v: sy.Beta(v, 1)),
    ("b", lambda v: sy.Beta(1, v)),
]


@pytest.mark.parametrize("bad", [0, -1.5, np.nan, np.inf])
@pytest.mark.parametrize(("name", "make"), SCALES, ids=range(len(SCALES)))
def test_a_scale_that_is_not_positive_and_finite_is_refused(
    name: str, make: Any, bad: float
) -> None:
    refused(lambda: make(bad), ArgumentError, f": {name}", "positive", f"{bad:g}")


@pytest.mark.parametrize("bad", [np.nan, np.inf, -np.inf])
@pytest.mark.parametrize(
    ("name", "make"),
    [("mean", lambda v: sy.Normal(v, 1)), ("location", lambda v: sy.StudentT(3, v, 1))],
    ids=["normal", "t"],
)
def test_a_location_that_is_not_finite_is_refused(name: str, make: Any, bad: float) -> None:
    refused(lambda: make(bad), ArgumentError, f": {name}", "finite", f"{bad:g}")


def test_one_bad_entry_of_an_array_of_scales_is_refused_and_counted() -> None:
    told = refused(lambda: sy.Normal(0, [1, -2, -3]), ArgumentError, "Normal: sd", "-2")
    assert "2 such values" in told.came


@pytest.mark.parametrize(
    "bad", [None, True, 1j, object(), [None, 1], {"a": 1}, np.array(["x"])], ids=repr
)
def test_a_hyperparameter_that_is_no_number_is_refused(bad: Any) -> None:
    refused(lambda: sy.Normal(0, bad), ArgumentTypeError, "Normal: sd")


def test_hyperparameters_in_ragged_rows_are_refused() -> None:
    refused(lambda: sy.Normal([[1], [1, 2]], 1), ShapeError, "Normal: mean", "ragged")


def test_a_hyperparameter_without_entries_is_refused() -> None:
    with pytest.raises(sy.errors.SteelyardError) as caught:
        sy.Normal([], 1)
    assert "mean" in caught.value.argument


@pytest.mark.parametrize(
    "limits", [(1, 0), (1, 1), (np.inf, np.inf), (-np.inf, -np.inf), ([0, 2], [1, 2])], ids=repr
)
def test_limits_in_the_wrong_order_are_refused(limits: tuple[Any, Any]) -> None:
    told = refused(lambda: sy.Flat(*limits), ArgumentError, "Flat: upper", "lower=")
    assert "lower limit first" in told.next_step


def test_a_limit_that_is_nan_is_refused() -> None:
    refused(lambda: sy.Flat(np.nan, 1), ArgumentError, "Flat: lower", "nan")


@pytest.mark.parametrize("prior", [5, "normal", [sy.Normal(0, 1)], sy.Normal(0, 1)], ids=str)
def test_a_prior_that_is_no_mapping_is_refused(draws: Draws, prior: Any) -> None:
    refused(lambda: sy.Fit(draws, prior), ArgumentTypeError, "prior", type(prior).__name__)


@pytest.mark.parametrize("term", [None, 5, "normal", object(), {"mean": 0}], ids=repr)
def test_a_prior_term_of_a_wrong_type_is_refused(draws: Draws, term: Any) -> None:
    refused(
        lambda: sy.Fit(draws, {"mu": term}), ArgumentTypeError, "prior['mu']", type(term).__name__
    )


def test_a_distribution_class_in_place_of_a_distribution_is_refused(draws: Draws) -> None:
    refused(lambda: sy.Fit(draws, {"mu": sy.Normal}), ArgumentTypeError, "prior['mu']", "Normal")


@pytest.mark.parametrize("key", [3, (), ("mu", 3), None], ids=repr)
def test_a_prior_key_that_names_nothing_is_refused(draws: Draws, key: Any) -> None:
    refused(lambda: sy.Fit(draws, {key: sy.Normal(0, 1)}), ArgumentTypeError, "prior", repr(key))


@pytest.mark.parametrize("key", ["nu", "rate[3]", "mu[0]", "rate[-1]", "rate[east]", ("mu", "nu")])
def test_a_prior_term_for_a_parameter_that_is_not_there_is_refused(draws: Draws, key: Any) -> None:
    told = refused(lambda: sy.Fit(draws, {key: sy.Normal(0, 1)}), UnknownNameError, "prior")
    assert told.came


def test_a_name_close_to_a_parameter_is_offered(draws: Draws) -> None:
    told = refused(
        lambda: sy.Fit(draws, {"tao": sy.HalfNormal(1)}), UnknownNameError, "prior", "'tao'"
    )
    assert "'tau'" in told.next_step


def test_a_hyperparameter_that_names_no_parameter_is_refused(draws: Draws) -> None:
    prior = {"rate": sy.Normal("mu", "sigma")}
    refused(lambda: sy.Fit(draws, prior), UnknownNameError, "prior['rate']", "'sigma'")


def test_a_named_scale_whose_draws_are_not_positive_is_refused(draws: Draws) -> None:
    prior = {"mu": sy.Normal(0, "rate[0]")}
    count = int((draws["rate"][..., 0] <= 0).sum())
    told = refused(lambda: sy.Fit(draws, prior), PriorError, "Normal: sd", "rate[0]")
    assert str(count) in told.came
    assert count > 0


@pytest.mark.parametrize(
    ("term", "count"),
    [
        (sy.HalfNormal(1), lambda x: (x < 0).sum()),
        (sy.Flat(0.05, 1), lambda x: (x < 0.05).sum()),
        (sy.Gamma(2, 2), lambda x: (x <= 0).sum()),
        (stats.uniform(0.05, 1), lambda x: (x < 0.05).sum()),
        (stats.halfnorm(), lambda x: (x < 0).sum()),
    ],
    ids=["HalfNormal", "Flat", "Gamma", "scipy uniform", "scipy halfnorm"],
)
def test_draws_outside_the_stated_support_are_refused_and_counted(
    draws: Draws, term: Any, count: Any
) -> None:
    outside = int(count(draws["rate"][..., 1]))
    assert outside > 0
    told = refused(
        lambda: sy.Fit(draws, {"rate[1]": term}),
        PriorError,
        "prior['rate[1]']",
        f"{outside} of 200",
    )
    assert "chain" in told.came


def test_a_parameter_with_two_prior_terms_is_refused(draws: Draws) -> None:
    for second in ("rate[0]", ("mu", "rate")):
        prior = {"rate": sy.Normal(0, 1), second: sy.Normal(0, 1)}
        refused(lambda p=prior: sy.Fit(draws, p), PriorError, "prior", "rate")


def test_hyperparameters_that_do_not_broadcast_against_the_parameter_are_refused(
    draws: Draws,
) -> None:
    refused(
        lambda: sy.Fit(draws, {"rate": sy.Normal([0, 1], 1)}), ShapeError, "Normal", "(2,)", "3)"
    )


def test_a_named_hyperparameter_of_another_shape_is_refused(draws: Draws) -> None:
    refused(lambda: sy.Fit(draws, {"mu": sy.Normal("rate", 1)}), ShapeError, "Normal: mean", "3)")


@pytest.mark.parametrize("shape", [(199,), (50, 4), ()])
def test_a_prior_array_that_is_not_aligned_with_the_draws_is_refused(
    draws: Draws, shape: tuple[int, ...]
) -> None:
    term = np.zeros(shape)
    refused(lambda: sy.Fit(draws, {"any": term}), ShapeError, "prior['any']", shape, "(4, 50")


@pytest.mark.parametrize(
    ("term", "error", "shown"),
    [
        (lambda d: 0.0, ShapeError, "()"),
        (lambda d: d["mu"][:-1], ShapeError, "(199,)"),
        (lambda d: d["mu"] * np.nan, PriorError, "200 of 200"),
        (lambda d: d["mu"] * np.nan + np.inf, PriorError, "200 of 200"),
        (lambda d: d["mu"].astype(str), ArgumentTypeError, "<U"),
        (lambda d: None, ArgumentTypeError, "object"),
        (lambda d: sy.Normal, ArgumentTypeError, ""),
    ],
    ids=["number", "too short", "NaN", "inf", "text", "None", "class"],
)
def test_a_prior_callable_that_gives_no_log_densities_is_refused_when_used(
    draws: Draws, term: Any, error: Any, shown: str
) -> None:
    fit = sy.Fit(draws, {"mu": term})
    refused(lambda: fit.reweigh(sy.swap_prior(mu=sy.Normal(0, 1))), error, "prior['mu']", shown)


def test_a_joint_scipy_distribution_of_another_dimension_is_refused(draws: Draws) -> None:
    term = stats.multivariate_normal(np.zeros(3))
    refused(lambda: sy.Fit(draws, {("mu", "tau"): term}), PriorError, "prior", "3")
