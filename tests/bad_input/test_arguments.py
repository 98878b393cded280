"""Sizes, seeds, methods, axes, thread counts; and yes/no asked of what holds more than that."""

from __future__ import annotations

import operator
from collections.abc import Callable
from typing import Any

import numpy as np
import pytest

import steelyard as sy
from steelyard.errors import (
    ArgumentError,
    ArgumentTypeError,
    RatioError,
    ShapeError,
    SteelyardError,
    TruthValueError,
    UnknownNameError,
)

from .telling import refused

LOGS = np.log([0.5, 0.3, 0.2])


@pytest.mark.parametrize("size", [0, -1, -1000])
def test_a_size_below_one_is_refused(fit: sy.Fit, size: int) -> None:
    refused(lambda: fit.base.resample(size), ArgumentError, "size", size)
    refused(lambda: sy.weights.resample(LOGS, size), ArgumentError, "size", size)


@pytest.mark.parametrize("size", [1.0, "3", None, True, [3], np.nan], ids=repr)
def test_a_size_that_is_no_integer_is_refused(fit: sy.Fit, size: Any) -> None:
    refused(lambda: fit.base.resample(size), ArgumentTypeError, "size", repr(size))


@pytest.mark.parametrize("method", ["random", None, 3, "Systematic", ["systematic"]], ids=repr)
def test_a_method_that_is_not_known_is_refused(fit: sy.Fit, method: Any) -> None:
    told = refused(lambda: fit.base.resample(3, method), ArgumentError, "method", repr(method))
    assert "systematic" in told.expected


@pytest.mark.parametrize(
    "rng", [1.5, "7", True, object(), -1, [1.5], {"seed": 1}, np.float64(3)], ids=repr
)
def test_a_seed_of_a_wrong_type_is_refused(fit: sy.Fit, rng: Any) -> None:
    refused(lambda: fit.base.resample(3, rng=rng), ArgumentTypeError, "rng")
    refused(lambda: sy.weights.resample(LOGS, 3, rng=rng), ArgumentTypeError, "rng")


def test_more_draws_without_replacement_than_carry_weight_are_refused() -> None:
    logs = np.array([0.0, -np.inf, 0.0])
    refused(
        lambda: sy.weights.resample(logs, 3, "without_replacement"), ArgumentError, "size", "2", "3"
    )


@pytest.mark.parametrize("shape", [(), (2, 3), (3, 1)])
def test_log_weights_that_are_no_vector_are_not_resampled(shape: tuple[int, ...]) -> None:
    refused(lambda: sy.weights.resample(np.zeros(shape), 2), ShapeError, "log_weights")


FUNCTIONS: dict[str, Callable[..., Any]] = {
    "normalise": sy.weights.normalise,
    "effective_size": sy.weights.effective_size,
    "largest_share": sy.weights.largest_share,
    "smooth": sy.weights.smooth,
    "tail_shape": sy.weights.tail_shape,
}
FUNCTION = pytest.mark.parametrize("function", FUNCTIONS.values(), ids=FUNCTIONS)


@FUNCTION
def test_an_axis_is_required_above_one_dimension(function: Callable[..., Any]) -> None:
    told = refused(lambda: function(np.zeros((4, 50))), ArgumentError, "axis", "2 axes")
    assert "axis=(0, 1)" in told.next_step


@FUNCTION
@pytest.mark.parametrize("axis", [2, -3, 0.5, "draw", (0, 2), True, (0, 0), (0, -2), ()], ids=repr)
def test_axes_that_are_not_there_are_refused(function: Callable[..., Any], axis: Any) -> None:
    refused(lambda: function(np.zeros((4, 50)), axis), ArgumentError, "axis", repr(axis))


@FUNCTION
def test_log_weights_without_a_finite_one_are_refused(function: Callable[..., Any]) -> None:
    none = np.full((3, 2), -np.inf)
    none[0, 0] = 0.0
    refused(lambda: function(none, 0), RatioError, "log", "−inf for every draw in column 1")


@FUNCTION
@pytest.mark.parametrize("shape", [(0,), ()])
def test_no_draws_are_refused(function: Callable[..., Any], shape: tuple[int, ...]) -> None:
    with pytest.raises(ShapeError) as caught:
        function(np.zeros(shape))
    assert "draw" in caught.value.expected


def test_log_sum_exp_refuses_nan_and_plus_infinity_but_not_nothing() -> None:
    refused(lambda: sy.weights.log_sum_exp([0.0, np.nan]), RatioError, "x", "nan at draw 1")
    refused(lambda: sy.weights.log_sum_exp([np.inf, 0.0]), RatioError, "x", "inf at draw 0")
    assert sy.weights.log_sum_exp([-np.inf, -np.inf]) == -np.inf


@pytest.mark.parametrize(
    "out",
    [np.empty(4), np.empty((3, 1)), np.empty(3, dtype=np.float32), np.empty(3, ">f8"), [0.0] * 3],
    ids=["longer", "column", "float32", "byte-swapped", "list"],
)
def test_an_out_of_another_shape_or_type_is_refused(out: Any) -> None:
    for function in (sy.weights.normalise, sy.weights.smooth):
        refused(lambda f=function: f(np.zeros(3), out=out), ShapeError, "out", "(3,)")


def test_an_out_that_cannot_be_written_is_refused() -> None:
    out = np.empty(3)
    out.flags.writeable = False
    refused(lambda: sy.weights.normalise(np.zeros(3), out=out), ArgumentError, "out", "read-only")


@pytest.mark.parametrize("efficiency", [0, -1, 1.5, np.nan, np.inf])
def test_an_efficiency_outside_zero_to_one_is_refused(efficiency: float) -> None:
    for function in (sy.weights.smooth, sy.weights.tail_shape):
        refused(
            lambda f=function: f(np.zeros(9), relative_efficiency=efficiency),
            ArgumentError,
            "relative_efficiency",
            f"{efficiency:g}",
        )


def test_an_efficiency_of_another_shape_is_refused() -> None:
    logs = np.zeros((9, 2))
    refused(
        lambda: sy.weights.smooth(logs, 0, np.ones(3)), ShapeError, "relative_efficiency", "(3,)"
    )


def test_a_kind_of_effective_size_that_is_not_known_is_refused() -> None:
    refused(lambda: sy.weights.effective_size(LOGS, kind="n"), ArgumentError, "kind", "'n'")


def test_draws_and_weights_that_disagree_are_refused() -> None:
    refused(lambda: sy.weights.quantile([1, 2], LOGS, 0.5), ShapeError, "log_weights", "(3,)", "2")
    refused(
        lambda: sy.weights.influence(np.zeros((9, 2)), np.zeros(8)),
        ShapeError,
        "quantities",
        "(8,)",
    )


def test_influence_of_impossible_observations_is_refused() -> None:
    for bad in (np.nan, np.inf, -np.inf):
        loglik = np.zeros((9, 2))
        loglik[4, 1] = bad
        told = refused(
            lambda a=loglik: sy.weights.influence(a, np.arange(9.0)), RatioError, "loglik"
        )
        assert "draw 4, column 1" in told.came


@pytest.mark.parametrize("n", [2.0, "2", None, True, [2]], ids=repr)
def test_a_thread_count_that_is_no_integer_is_refused(n: Any) -> None:
    refused(lambda: sy.threads(n), ArgumentTypeError, "threads", repr(n))


@pytest.mark.parametrize("n", [0, -1, 100_000])
def test_a_thread_count_that_makes_no_sense_is_refused(n: int) -> None:
    refused(lambda: sy.threads(n), ArgumentError, "threads", n)


@pytest.mark.parametrize("smooth", ["no", 0, None], ids=repr)
def test_smooth_that_is_neither_true_nor_false_is_refused(fit: sy.Fit, smooth: Any) -> None:
    change = sy.drop("gauge B")
    refused(lambda: fit.reweigh(change, smooth=smooth), ArgumentTypeError, "smooth", repr(smooth))
    refused(lambda: sy.weigh(np.zeros(9), smooth=smooth), ArgumentTypeError, "smooth")


def test_a_and_b_between_changes_is_refused_and_names_the_ampersand() -> None:
    one, other = sy.drop("gauge A"), sy.drop("gauge B")
    told = refused(lambda: one and other, TruthValueError, "change", "&")
    assert "a & b" in told.next_step
    refused(lambda: one or other, TruthValueError, "change", "&")
    refused(lambda: not one, TruthValueError, "change", "&")


def test_if_verdict_is_refused_and_names_is_sound(fit: sy.Fit) -> None:
    for verdict in (fit.base.verdict, fit.base.mean("rate").verdict):
        told = refused(lambda v=verdict: bool(v), TruthValueError, "verdict", "bool(verdict)")
        assert ".is_sound" in told.next_step


def test_if_estimate_is_refused_and_names_value(fit: sy.Fit) -> None:
    for estimate in (fit.base.mean("mu"), fit.base.mean("rate")):
        told = refused(lambda e=estimate: bool(e), TruthValueError, "estimate", ".value")
        assert ".value" in told.next_step


@pytest.mark.parametrize("name", ["lt", "le", "gt", "ge", "eq", "ne"])
@pytest.mark.parametrize("other", [0.1, np.float64(0.1), None, np.zeros(3), "0.1"], ids=repr)
def test_comparing_an_estimate_is_refused_on_either_side(
    fit: sy.Fit, name: str, other: Any
) -> None:
    estimate, compare = fit.base.mean("mu"), getattr(operator, name)
    refused(lambda: compare(estimate, other), TruthValueError, "estimate", ".value")
    refused(lambda: compare(other, estimate), TruthValueError, "estimate", ".value")
    refused(lambda: compare(estimate, estimate), TruthValueError, "estimate", "Estimate")


@pytest.mark.parametrize("other", ["good", "Sound", "", 2, 0.5], ids=repr)
def test_a_level_compares_with_the_three_names_only(fit: sy.Fit, other: Any) -> None:
    level = fit.base.verdict.level
    for compare in (operator.lt, operator.le, operator.gt, operator.ge):
        refused(lambda c=compare: c(level, other), ArgumentError, "level", "'strained'")
    if isinstance(other, str):
        refused(lambda: level == other, ArgumentError, "level", repr(other))
        refused(lambda: level != other, ArgumentError, "level", repr(other))


def test_a_message_cuts_what_nobody_would_read(fit: sy.Fit) -> None:
    many = np.arange(900.0)
    for ask in (
        lambda: fit.base.interval("mu", many),
        lambda: fit.resistance("mu > 0", level=many),
        lambda: fit.worst_case("mu", divergence=many),
        lambda: fit.state(many),  # type: ignore[arg-type]
    ):
        with pytest.raises(SteelyardError) as caught:
            ask()
        assert "characters)" in str(caught.value)
        assert len(str(caught.value)) < 1000


@pytest.mark.parametrize("groups", [{"a": 1.0}, {"a": [["likelihood: A"]]}, {"a": None}], ids=repr)
def test_groups_of_an_attribution_are_lists_of_terms(fit: sy.Fit, groups: Any) -> None:
    answer = fit.reweigh(sy.power(likelihood=0.9))
    with pytest.raises(SteelyardError) as caught:
        answer.attribute("mu", groups=groups)
    assert caught.value.argument == "groups['a']"


def test_arrays_where_a_choice_or_a_plan_belongs_are_refused(fit: sy.Fit) -> None:
    two = np.array([1.0, 2.0])
    refused(lambda: fit.local("mu", of=two), ArgumentError, "of")  # type: ignore[arg-type]
    refused(lambda: fit.triage(np.array(1.0)), ArgumentTypeError, "scenarios")
    refused(lambda: fit.k_fold([[0, 1], [2]], by=two), ArgumentError, "by")  # type: ignore[arg-type]
    refused(lambda: fit.least_perturbation("mu", 0.1, prior_of=two), UnknownNameError, "prior_of")


@pytest.mark.parametrize(
    "sd",
    [lambda draws: 0.5, lambda draws: [[1.0], [1.0, 2.0]], [[1.0], [1.0, 2.0]]],
    ids=["one number", "ragged rows from a callable", "ragged rows"],
)
def test_the_noise_of_a_term_has_a_shape(fit: sy.Fit, sd: Any) -> None:
    refused(lambda: fit.reweigh(sy.raise_noise("gauge A", 1.2, sd=sd)), ShapeError, "sd")
