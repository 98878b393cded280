"""Wrong input to leaving out: which argument, what was expected, what came, what to do."""

from __future__ import annotations

from collections.abc import Callable
from typing import Any

import numpy as np
import pytest
import xarray as xr

import steelyard as sy
from steelyard.errors import (
    AmbiguousNameError,
    ArgumentError,
    ArgumentTypeError,
    ChangeError,
    LikelihoodError,
    QuantityError,
    RatioError,
    ShapeError,
    SteelyardError,
    UnknownNameError,
)
from steelyard.leaving_out import (
    by_observation,
    combine,
    k_fold,
    leave_out,
    look_ahead,
    sampled_from,
)

SEED = 67
CHAINS, LENGTH, COUNT = 2, 50, 6


def _values(*shape: int) -> Any:
    return (
        -0.5 * np.random.default_rng(SEED).normal(size=(CHAINS, LENGTH, *(shape or (COUNT,)))) ** 2
    )


def _record(loglik: Any = None) -> Any:
    draws = {"mu": np.random.default_rng(SEED + 1).normal(size=(CHAINS, LENGTH))}
    return sy.Fit(draws, loglik=_values() if loglik is None else loglik)._record


def _with(place: tuple[int, ...], value: float) -> Any:
    values = _values()
    values[place] = value
    return values


def refused(
    act: Callable[[], Any], error: type[SteelyardError], argument: str, *came: object
) -> None:
    with pytest.raises(SteelyardError) as caught:
        act()
    told = caught.value
    assert type(told) is error, f"{type(told).__name__}: {told}"
    assert argument in told.argument
    for part in came:
        assert str(part) in f"{told.expected} | {told.came}", str(told)
    assert told.next_step.strip().endswith((".", "?"))


def test_a_nan_names_draw_chain_and_observation() -> None:
    record = _record(_with((1, 17, 3), np.nan))
    refused(
        lambda: leave_out(record), LikelihoodError, "loglik", "chain 1, draw 17", "observation 3"
    )


def test_a_nan_in_a_group_names_its_observation() -> None:
    record = _record(_with((0, 2, 5), np.nan))
    act = lambda: leave_out(record, [[0, 1], [4, 5]])  # noqa: E731
    refused(act, LikelihoodError, "loglik", "chain 0, draw 2", "observation 5")


def test_a_nan_in_several_axes_names_all_positions() -> None:
    values = _values(2, 3)
    values[0, 0, 1, 2] = np.inf
    refused(lambda: leave_out(_record(values)), LikelihoodError, "loglik", "observation 1, 2")


def test_an_observation_impossible_under_every_draw_is_named() -> None:
    values = _values()
    values[:, :, 4] = -np.inf
    refused(lambda: leave_out(_record(values)), LikelihoodError, "loglik", "observation 4", "−inf")


def test_an_observation_impossible_under_one_draw_cannot_be_left_out() -> None:
    record = _record(_with((0, 7, 2), -np.inf))
    refused(lambda: leave_out(record), RatioError, "log likelihood", "chain 0, draw 7")


def test_a_draw_without_base_weight_may_make_an_observation_impossible() -> None:
    draws = {"mu": np.random.default_rng(SEED + 1).normal(size=(CHAINS, LENGTH))}
    weights = np.zeros((CHAINS, LENGTH))
    weights[0, 7] = -np.inf
    fit = sy.Fit(draws, loglik=_with((0, 7, 2), -np.inf), log_weights=weights)
    left = leave_out(fit._record)
    assert np.isfinite(left.by_group.value).all()


def test_a_likelihood_of_other_draws_is_refused() -> None:
    refused(lambda: _record(_values()[:, :-1]), ShapeError, "loglik", "(2, 50, …)")


def test_a_fit_without_likelihood_and_a_total_are_refused() -> None:
    bare = sy.Fit({"mu": np.arange(10.0)})._record
    refused(lambda: leave_out(bare), LikelihoodError, "loglik", "without one")
    total = _record({"all": _values()[..., 0]})
    refused(lambda: leave_out(total), LikelihoodError, "loglik['all']", "a total")


def test_several_terms_ask_which() -> None:
    record = _record({"a": _values(), "b": _values(4)})
    refused(lambda: leave_out(record), AmbiguousNameError, "term", "a, b")
    refused(lambda: leave_out(record, term="c"), UnknownNameError, "term", "'c'")


GROUPS: list[tuple[Any, type[SteelyardError], str, Any]] = [
    (np.zeros(5, dtype=int), ShapeError, "groups", "(5,)"),
    (np.zeros(COUNT), ArgumentTypeError, "groups", "float64"),
    (np.zeros(COUNT, dtype=bool), ArgumentTypeError, "groups", "bool"),
    ([[0, 1], []], ArgumentError, "groups[1]", "empty"),
    ([[0, 1], [6]], UnknownNameError, "groups[1]", "6"),
    ([[0, -1]], UnknownNameError, "groups[0]", "-1"),
    ([[0, 0]], ArgumentError, "groups[0]", "twice"),
    ([[0.0, 1.0]], ArgumentTypeError, "groups[0]", "float64"),
    ([list(range(COUNT))], ArgumentError, "groups", "all of them"),
    (np.zeros(COUNT, dtype=int), ArgumentError, "groups", "all of them"),
    ({}, ArgumentError, "groups", "none"),
    ("pile", UnknownNameError, "groups", "'pile'"),
]


@pytest.mark.parametrize(("groups", "error", "argument", "came"), GROUPS)
def test_groups_that_cannot_be(
    groups: Any, error: type[SteelyardError], argument: str, came: str
) -> None:
    record = _record()
    refused(lambda: leave_out(record, groups), error, argument, came)


def test_a_dimension_that_is_not_there_offers_those_that_are() -> None:
    array = xr.DataArray(_values(), dims=("chain", "draw", "pile"))
    with pytest.raises(UnknownNameError, match="pile"):
        leave_out(_record(array), "pil")


def test_lists_of_positions_need_one_axis() -> None:
    record = _record(_values(2, 3))
    refused(lambda: leave_out(record, [[0], [1, 2]]), ArgumentError, "groups", "(2, 3)")


def test_a_single_observation_cannot_be_left_out() -> None:
    record = _record(_values(1))
    refused(lambda: leave_out(record), ArgumentError, "groups", "all of them")


def test_conditional_terms_need_one_value_a_group() -> None:
    record = _record()
    act = lambda: leave_out(record, [[0, 1], [2]], conditional=_values())  # noqa: E731
    refused(act, ShapeError, "conditional", "(2,)", f"({COUNT},)")


@pytest.mark.parametrize(
    ("sample", "error"),
    [
        (COUNT + 1, ArgumentError),
        (1, ArgumentError),
        (2.5, ArgumentTypeError),
        (True, ArgumentTypeError),
    ],
)
def test_samples_that_cannot_be_drawn(sample: Any, error: type[SteelyardError]) -> None:
    record = _record()
    refused(lambda: leave_out(record, sample=sample), error, "sample", sample)


def test_surrogates_must_fit() -> None:
    record = _record()
    act = lambda: leave_out(record, sample=3, surrogate=np.zeros(4))  # noqa: E731
    refused(act, ShapeError, "surrogate", "(4,)")
    bad = np.full(COUNT, np.nan)
    refused(lambda: leave_out(record, sample=3, surrogate=bad), ArgumentError, "surrogate", "NaN")


def test_progress_must_be_callable() -> None:
    record = _record()
    refused(lambda: leave_out(record, progress="yes"), ArgumentTypeError, "progress", "yes")


def test_contrasts_of_other_data_are_refused() -> None:
    record = _record()
    left = leave_out(record)
    refused(lambda: left.contrast(leave_out(_record(_values(5)))), ShapeError, "other", "(5,)")
    refused(lambda: left.contrast(record), ArgumentTypeError, "other", "Base")
    one, two = (leave_out(record, groups) for groups in ([[0], [1]], [[0], [2]]))
    refused(lambda: one.contrast(two), ArgumentError, "other", "hold others")
    sampled = [leave_out(record, sample=3, rng=seed) for seed in (1, 2)]
    refused(lambda: sampled[0].contrast(sampled[1]), ArgumentError, "other", "sample")
    labels = (["P1", "P2", "P3", "P4", "P5", "P6"], ["P1", "P2", "P9", "P4", "P5", "P6"])
    named = [
        leave_out(
            _record(xr.DataArray(_values(), dims=("chain", "draw", "pile"), coords={"pile": label}))
        )
        for label in labels
    ]
    refused(lambda: named[0].contrast(named[1]), ArgumentError, "other", "'P9'", "'P3'")


def test_mixtures_of_other_data_or_of_one_model_are_refused() -> None:
    left = leave_out(_record())
    refused(lambda: combine({"one": left}), ArgumentTypeError, "models", "dict")
    other = leave_out(_record(_values(5)))
    act = lambda: combine({"one": left, "two": other})  # noqa: E731
    refused(act, ShapeError, "models['two']", "(5,)")


def test_quantities_and_decisions_are_checked() -> None:
    left = leave_out(_record())
    refused(lambda: left.influence("nu"), UnknownNameError, "quantity", "nu")
    refused(lambda: left.influential("mu", 0), ArgumentError, "n", "0")
    two = np.zeros((CHAINS, LENGTH, 2))
    refused(lambda: left.influential(two), QuantityError, "quantity", "2 elements")
    refused(lambda: left.fewest_to_flip("mu > 0", 1.5), ArgumentError, "level", "1.5")
    refused(lambda: left.fewest_to_flip("mu > 0", 0.5, most=0), ArgumentError, "most", "0")
    conditional = leave_out(_record(), conditional=_values())
    refused(lambda: conditional.fewest_to_flip("mu > 0", 0.5), ChangeError, "fewest_to_flip")


def test_calibration_needs_one_source_of_the_right_shape() -> None:
    left = leave_out(_record())
    y, draws = np.zeros(COUNT), _values()
    refused(lambda: left.calibration(y), ArgumentError, "predictive", "neither")
    refused(lambda: left.calibration(y, draws, cdf=draws), ArgumentError, "predictive", "both")
    refused(lambda: left.calibration(None, draws), ArgumentError, "observed", "nothing")
    refused(lambda: left.calibration(np.zeros(4), draws), ShapeError, "observed", "(4,)")
    refused(lambda: left.calibration(y, _values(4)), ShapeError, "predictive", "(4,)")
    outside = float(draws[(draws < 0) | (draws > 1)][0])
    refused(lambda: left.calibration(cdf=draws), ArgumentError, "cdf", f"{outside:.3g}")
    ones = np.ones_like(draws)
    act = lambda: left.calibration(cdf=0 * ones, cdf_below=ones)  # noqa: E731
    refused(act, ArgumentError, "cdf_below", "larger")
    refused(lambda: left.calibration(cdf=ones, level=95), ArgumentError, "level", "95")
    nan = np.full(COUNT, np.nan)
    refused(lambda: left.calibration(nan, draws), ArgumentError, "observed", "NaN")


FOLDS: list[tuple[dict[str, Any], type[SteelyardError], str]] = [
    ({"folds": 1}, ArgumentError, "folds"),
    ({"folds": COUNT + 1}, ArgumentError, "folds"),
    ({"folds": 2, "by": "luck"}, ArgumentError, "by"),
    ({"folds": 2, "by": "place"}, ArgumentError, "places"),
    ({"folds": 2, "places": np.zeros(COUNT)}, ArgumentError, "places"),
    ({"folds": 2, "by": "place", "places": np.zeros(4)}, ShapeError, "places"),
    ({"folds": 2, "by": "place", "places": np.full(COUNT, np.nan)}, ArgumentError, "places"),
    ({"folds": 2, "apart": 1}, ArgumentError, "apart"),
    ({"folds": 2, "by": "order", "apart": -1}, ArgumentTypeError, "apart"),
    ({"folds": 2, "by": "order", "apart": 3}, ArgumentError, "groups"),
    ({"folds": [[0], [1]], "by": "order"}, ArgumentError, "by"),
]


@pytest.mark.parametrize(("arguments", "error", "argument"), FOLDS)
def test_folds_that_cannot_be(
    arguments: dict[str, Any], error: type[SteelyardError], argument: str
) -> None:
    record = _record()
    refused(lambda: k_fold(record, **arguments), error, argument)


AHEAD: list[tuple[dict[str, Any], type[SteelyardError], str]] = [
    ({"from_": COUNT}, ArgumentError, "from_"),
    ({"from_": COUNT + 10}, ArgumentError, "from_"),
    ({"from_": 0}, ArgumentError, "from_"),
    ({"from_": 4, "steps": 3}, ArgumentError, "from_"),
    ({"from_": 2, "steps": 0}, ArgumentError, "steps"),
    ({"from_": 2.0}, ArgumentTypeError, "from_"),
    ({"from_": 2, "until": "sound"}, ArgumentError, "until"),
    ({"from_": 2, "series": "likelihood"}, ArgumentTypeError, "series"),
    ({"from_": 2, "series": _values(2, 3)}, ShapeError, "series"),
    ({"from_": 2, "series": _values()[:, :-1]}, ShapeError, "series"),
]


@pytest.mark.parametrize(("arguments", "error", "argument"), AHEAD)
def test_looking_ahead_where_nothing_is(
    arguments: dict[str, Any], error: type[SteelyardError], argument: str
) -> None:
    record = _record(_values(2))
    given = {"series": _values(), **arguments}
    refused(lambda: look_ahead(record, given.pop("series"), **given), error, argument)


def test_refits_must_bring_fit_and_series() -> None:
    values = np.random.default_rng(3).normal(size=(CHAINS, LENGTH, 40)) * 8
    record = _record(_values(2))

    def ahead(refit: Any) -> Any:
        return look_ahead(record, values, from_=2, refit=refit)

    refused(lambda: ahead(lambda point: None), ArgumentTypeError, "refit", "NoneType")
    refused(lambda: ahead(lambda point: (1, values)), ArgumentTypeError, "refit", "int")
    refused(lambda: ahead(lambda point: (record, values[..., :9])), LikelihoodError, "refit", "9")


def test_refits_folded_in_must_be_scores_of_groups_that_are_there() -> None:
    left = leave_out(_record())
    refused(lambda: left.with_refits({}), ArgumentTypeError, "log_scores", "{}")
    refused(lambda: left.with_refits({9: -1.0}), UnknownNameError, "log_scores", "9")
    refused(lambda: left.with_refits({1: np.nan}), ArgumentError, "log_scores[1]", "nan")
    refused(lambda: left.with_refits({1: "-2"}), ArgumentError, "log_scores[1]", "-2")


def test_what_was_sampled_and_blocks_by_observation_are_checked() -> None:
    refused(lambda: sampled_from(_record(), "prior"), ArgumentError, "sampled", "'prior'")
    refused(lambda: by_observation(3, 10, 5), ArgumentTypeError, "function", "int")
    refused(lambda: by_observation(lambda part: None, 0, 5), ArgumentError, "draws", "0")
    wrong = by_observation(lambda part: np.zeros((3, 2)), CHAINS * LENGTH, 5)
    draws = {"mu": np.zeros((CHAINS, LENGTH)) + np.arange(LENGTH)}
    record = sy.Fit(draws, loglik=wrong)._record
    refused(lambda: leave_out(record), ShapeError, "by_observation", "(3, 2)")
