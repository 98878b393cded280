"""Draws that cannot be read without dropping, filling in or guessing."""

from __future__ import annotations

from typing import Any

import numpy as np
import pytest

import steelyard as sy
from steelyard.errors import (
    ArgumentError,
    ArgumentTypeError,
    DrawsError,
    ShapeError,
    UnknownNameError,
)

from .telling import refused

Draws = dict[str, np.ndarray]
X = np.random.default_rng(20_261_222).normal(size=200)


def test_no_parameter_at_all_is_refused() -> None:
    refused(lambda: sy.Fit({}), DrawsError, "draws", "none")


@pytest.mark.parametrize("shape", [(0,), (4, 0), (0, 4), (0, 0), (4, 0, 3)])
def test_empty_draws_are_refused(shape: tuple[int, ...]) -> None:
    refused(lambda: sy.Fit({"mu": np.empty(shape)}), DrawsError, "draws", "no draw")


@pytest.mark.parametrize("shape", [(1,), (1, 1), (1, 1, 3)])
def test_a_single_draw_is_refused(shape: tuple[int, ...]) -> None:
    refused(lambda: sy.Fit({"mu": np.ones(shape)}), DrawsError, "draws", "one draw", "two draws")


def test_a_single_number_is_refused() -> None:
    refused(lambda: sy.Fit({"mu": 0.1}), DrawsError, "draws['mu']", "a single number")


@pytest.mark.parametrize("shape", [(200, 0), (200, 3, 0)])
def test_a_parameter_without_elements_is_refused(shape: tuple[int, ...]) -> None:
    source = {"mu": X, "rate": np.empty(shape)}
    refused(lambda: sy.Fit(source), DrawsError, "draws['rate']", shape)


@pytest.mark.parametrize("bad", [np.nan, np.inf, -np.inf])
def test_draws_that_are_not_finite_are_refused_with_their_place(draws: Draws, bad: float) -> None:
    rate = draws["rate"].copy()
    rate[2, 7, 1] = bad
    told = refused(lambda: sy.Fit({**draws, "rate": rate}), DrawsError, "draws['rate']", "1 ")
    assert "chain 2, draw 7" in told.came or "draw 107" in told.came


@pytest.mark.parametrize(
    ("other", "shown"),
    [((4, 49), "(4, 49)"), ((3, 50), "(3, 50)"), ((200,), "(200,)"), ((4, 49, 3), "(4, 49, 3)")],
)
def test_parameters_whose_draws_disagree_are_refused_with_both_shapes(
    draws: Draws, other: tuple[int, ...], shown: str
) -> None:
    source = {"mu": draws["mu"], "tau": np.ones(other)}
    told = refused(lambda: sy.Fit(source), ShapeError, "draws['tau']")
    assert shown[:-1] in told.came
    assert "4, 50" in told.expected


def test_stacked_parameters_of_unequal_length_are_refused_with_both_shapes() -> None:
    told = refused(
        lambda: sy.Fit({"mu": X, "rate": np.ones((199, 3))}), ShapeError, "draws['rate']"
    )
    assert "(199, 3)" in told.came
    assert "(200,)" in told.expected


@pytest.mark.parametrize("shape", [(50, 4), (50, 4, 3), (200, 1)])
def test_more_chains_than_draws_are_refused_as_swapped_axes(shape: tuple[int, ...]) -> None:
    told = refused(lambda: sy.Fit({"mu": np.ones(shape)}), DrawsError, "draws", shape[0], shape)
    assert "swap" in told.next_step


def test_swapped_axes_of_one_parameter_are_refused_with_both_shapes(draws: Draws) -> None:
    source = {"mu": draws["mu"], "rate": np.swapaxes(draws["rate"], 0, 1)}
    told = refused(lambda: sy.Fit(source), ShapeError, "draws['rate']")
    assert "(50, 4" in told.came
    assert "(4, 50" in told.expected


def test_ragged_chains_are_refused_and_stacking_is_advised() -> None:
    told = refused(
        lambda: sy.Fit({"mu": [X[:40].tolist(), X[:39].tolist()]}), ShapeError, "draws['mu']"
    )
    assert "chain=" in told.next_step


def test_ragged_chains_as_an_object_array_are_refused() -> None:
    ragged = np.empty(2, dtype=object)
    ragged[0], ragged[1] = X[:40], X[:39]
    refused(lambda: sy.Fit({"mu": ragged}), ArgumentTypeError, "draws['mu']", "object")


@pytest.mark.parametrize(
    ("values", "shown"),
    [
        (X.astype(object), "object"),
        (X.astype(complex), "complex128"),
        (X.astype(str), "<U"),
        (X.astype(bytes), "|S"),
        (np.zeros(200, dtype="M8[s]"), "datetime64"),
        (np.zeros(200, dtype=[("a", float)]), "a"),
        (["0.1", "0.2", "0.3"], "<U"),
        ([None] * 3, "object"),
    ],
    ids=["object", "complex", "text", "bytes", "time", "record", "list of text", "list of None"],
)
def test_arrays_that_are_not_real_numbers_are_refused(values: Any, shown: str) -> None:
    refused(lambda: sy.Fit({"mu": values}), ArgumentTypeError, "draws['mu']", shown)


@pytest.mark.parametrize("name", [3, None, ("a",), ""], ids=repr)
def test_names_that_are_not_texts_are_refused(name: Any) -> None:
    refused(lambda: sy.Fit({name: X}), ArgumentTypeError, "draws", repr(name))


def test_masked_entries_are_refused_and_not_filled_in() -> None:
    masked = np.ma.masked_array(X, mask=X > 1)
    told = refused(lambda: sy.Fit({"mu": masked}), ArgumentTypeError, "draws['mu']", "masked")
    assert str(int((X > 1).sum())) in told.came
    unmasked = np.ma.masked_array(X, mask=np.zeros(200, dtype=bool))
    assert np.array_equal(sy.Fit({"mu": unmasked}).draws["mu"], X)


@pytest.mark.parametrize("source", [None, 5, "draws.csv", object(), np.float64(3)], ids=repr)
def test_things_that_hold_no_draws_are_refused(source: Any) -> None:
    with pytest.raises(sy.errors.SteelyardError) as caught:
        sy.Fit(source)
    assert caught.value.next_step


def test_an_array_without_names_is_refused() -> None:
    refused(lambda: sy.Fit(np.ones((200, 2))), ArgumentError, "names", (200, 2))


@pytest.mark.parametrize("shape", [(200, 3), (200,), (4, 50, 3), (2, 4, 50, 2)])
def test_an_array_whose_columns_are_not_as_many_as_the_names_is_refused(
    shape: tuple[int, ...],
) -> None:
    refused(lambda: sy.Fit(np.ones(shape), names=["a", "b"]), ShapeError, "draws", shape)


def test_a_name_given_twice_is_refused() -> None:
    refused(lambda: sy.Fit(np.ones((9, 2)), names=["a", "a"]), ArgumentError, "names", "'a'")


@pytest.mark.parametrize("names", [5, [1, 2], [None, "a"]], ids=repr)
def test_names_of_a_wrong_type_are_refused(names: Any) -> None:
    told = refused(
        lambda: sy.Fit(np.arange(18.0).reshape(9, 2), names=names), ArgumentTypeError, "names"
    )
    assert told.came


def test_names_for_draws_that_have_names_already_are_refused(draws: Draws) -> None:
    refused(lambda: sy.Fit(draws, names=["a", "b", "c"]), ArgumentError, "names")
    read = sy.Fit(draws).draws
    refused(lambda: sy.Fit(read, names=["a", "b", "c"]), ArgumentError, "names")


def test_derived_names_that_are_not_among_the_draws_are_refused(draws: Draws) -> None:
    refused(lambda: sy.Fit(draws, derived=["age"]), UnknownNameError, "derived", "'age'")


def test_a_derived_name_that_is_taken_is_refused(draws: Draws) -> None:
    refused(
        lambda: sy.Fit(draws, derived={"mu": lambda d: d["mu"]}),
        ArgumentError,
        "derived['mu']",
        "mu",
    )


@pytest.mark.parametrize("derived", [5, 0.5], ids=repr)
def test_derived_of_a_wrong_type_is_refused(draws: Draws, derived: Any) -> None:
    refused(lambda: sy.Fit(draws, derived=derived), ArgumentTypeError, "derived")


def test_a_derived_quantity_that_is_no_callable_is_refused(draws: Draws) -> None:
    refused(lambda: sy.Fit(draws, derived={"x": 3}), ArgumentTypeError, "derived['x']", "int")


@pytest.mark.parametrize(
    ("recipe", "error", "shown"),
    [
        (lambda d: 1.0, ShapeError, "()"),
        (lambda d: d["mu"][:-1], ShapeError, "(199,)"),
        (lambda d: d["mu"] * np.nan, DrawsError, "NaN"),
        (lambda d: d["mu"].astype(str), ArgumentTypeError, "<U"),
        (lambda d: None, ArgumentTypeError, "object"),
    ],
    ids=["number", "too short", "NaN", "text", "None"],
)
def test_derived_quantities_that_are_no_draws_are_refused(
    draws: Draws, recipe: Any, error: Any, shown: str
) -> None:
    refused(lambda: sy.Fit(draws, derived={"x": recipe}), error, "derived['x']", shown)


@pytest.mark.parametrize("ordered", ["yes", 1, None], ids=repr)
def test_ordered_that_is_neither_true_nor_false_is_refused(draws: Draws, ordered: Any) -> None:
    refused(lambda: sy.Fit(draws, ordered=ordered), ArgumentTypeError, "ordered", repr(ordered))


@pytest.mark.parametrize(
    ("weights", "error", "shown"),
    [
        (np.full(200, np.nan), sy.errors.RatioError, "200"),
        (np.full(200, np.inf), sy.errors.RatioError, "inf"),
        (np.full(200, -np.inf), sy.errors.RatioError, "−inf for every draw"),
        (np.zeros((4, 50, 2)), sy.errors.RatioError, "(4, 50, 2)"),
        (np.zeros(199), ShapeError, "(199,)"),
        (np.zeros((50, 4)), ShapeError, "(50, 4)"),
        (np.zeros(200).astype(str), ArgumentTypeError, "<U"),
        ([[0.0], [0.0, 1.0]], ShapeError, "ragged"),
    ],
    ids=["NaN", "inf", "no weight", "too many axes", "short", "swapped", "text", "ragged"],
)
def test_base_log_weights_that_are_none_are_refused(
    draws: Draws, weights: Any, error: Any, shown: str
) -> None:
    refused(lambda: sy.Fit(draws, log_weights=weights), error, "log_weights", shown)
