"""Quantities that cannot be evaluated on the draws, and results that were asked the wrong way."""

from __future__ import annotations

from typing import Any

import numpy as np
import pytest
import xarray as xr

import steelyard as sy
from steelyard.errors import (
    AmbiguousNameError,
    ArgumentError,
    ArgumentTypeError,
    QuantityError,
    ShapeError,
    UnknownNameError,
)

from .telling import refused

ASKING = {
    "mean": lambda answer, q: answer.mean(q),
    "sd": lambda answer, q: answer.sd(q),
    "quantile": lambda answer, q: answer.quantile(q),
    "interval": lambda answer, q: answer.interval(q),
    "shortest interval": lambda answer, q: answer.interval(q, kind="shortest"),
    "shift": lambda answer, q: answer.shift(q),
    "distance": lambda answer, q: answer.distance(q),
    "covariance": lambda answer, q: answer.covariance(q),
    "table": lambda answer, q: answer.table(q),
}
ASKED = pytest.mark.parametrize("asked", ASKING)


@ASKED
@pytest.mark.parametrize("name", ["nu", "rate[3]", "rate[-1]", "mu[0]", "rate[0,0]", "rate[x]", ""])
def test_names_and_positions_that_are_not_there_are_refused(
    fit: sy.Fit, asked: str, name: str
) -> None:
    told = refused(lambda: ASKING[asked](fit.base, name), UnknownNameError, "quantity")
    assert repr(name) in str(told)


@ASKED
@pytest.mark.parametrize("quantity", [5, 0.5, object(), b"mu", 1j], ids=repr)
def test_things_that_are_no_quantity_are_refused(fit: sy.Fit, asked: str, quantity: Any) -> None:
    told = refused(lambda: ASKING[asked](fit.base, quantity), ArgumentTypeError, "quantity")
    assert type(quantity).__name__ in told.came


@ASKED
@pytest.mark.parametrize(
    ("quantity", "error"),
    [
        (lambda d: 1.0, ShapeError),
        (lambda d: None, ArgumentTypeError),
        (lambda d: d["mu"][:-1], ShapeError),
        (lambda d: d["mu"] * np.nan, QuantityError),
        (lambda d: d["mu"].astype(str), ArgumentTypeError),
        (lambda d: [[0.0], [0.0, 1.0]], ShapeError),
        ({}, QuantityError),
        ({"far": np.zeros(3)}, ShapeError),
    ],
    ids=["number", "None", "too short", "NaN", "text", "ragged", "empty mapping", "bad entry"],
)
def test_quantities_that_are_no_draws_are_refused(
    fit: sy.Fit, asked: str, quantity: Any, error: Any
) -> None:
    refused(lambda: ASKING[asked](fit.base, quantity), error, "quantity")


@pytest.mark.parametrize("asked", [a for a in ASKING if a != "shift"])
@pytest.mark.parametrize("event", ["mu > 0.1", lambda d: d["mu"] > 0.1, np.zeros((4, 50)) > 0])
def test_an_event_is_no_quantity_except_for_a_shift(fit: sy.Fit, asked: str, event: Any) -> None:
    told = refused(lambda: ASKING[asked](fit.base, event), QuantityError, "quantity")
    assert "prob(" in told.next_step


def test_a_list_of_names_is_several_quantities_and_an_unknown_one_is_refused(fit: sy.Fit) -> None:
    assert set(fit.base.table(["mu", "tau"])["quantity"]) == {"mu", "tau"}
    assert list(fit.base.mean(["mu", "tau"])) == ["mu", "tau"]
    refused(lambda: fit.base.mean(["mu", "tav"]), UnknownNameError, "quantity", "tav")


def test_bare_integers_in_brackets_are_refused_where_labels_differ_from_positions() -> None:
    rate = np.random.default_rng(1).normal(size=(4, 50, 3))
    data = xr.Dataset({"rate": (("chain", "draw", "quay"), rate)}, coords={"quay": [2, 1, 0]})
    base = sy.Fit(data).base
    told = refused(lambda: base.mean("rate[1]"), AmbiguousNameError, "rate[1]", "quay", "2…0")
    assert "label=" in told.next_step
    assert "position=" in told.next_step
    refused(lambda: base.prob("rate[1] > 0"), AmbiguousNameError, "rate[1]", "quay")
    assert base.mean("rate[label=2]").value == base.mean("rate[position=0]").value
    refused(lambda: base.mean("rate[label=7]"), UnknownNameError, "rate[label=7]", "'7'")
    refused(lambda: base.mean("rate[position=x]"), UnknownNameError, "rate", "'x'")


def test_an_answer_without_draws_has_no_names() -> None:
    answer = sy.weigh(np.zeros(10))
    refused(lambda: answer.mean("mu"), QuantityError, "quantity", "'mu'")
    with pytest.raises(sy.errors.SteelyardError) as caught:
        answer.prob("mu > 0")
    assert "event" in caught.value.argument


@pytest.mark.parametrize("asked", ["mean", "sd", "quantile", "shift", "table", "covariance"])
def test_an_answer_without_draws_says_that_there_is_nothing_to_estimate(asked: str) -> None:
    refused(lambda: ASKING[asked](sy.weigh(np.zeros(10)), None), QuantityError, "quantity")


@pytest.mark.parametrize("probs", [-0.1, 1.1, 50, [0.5, 95], np.nan, np.inf], ids=repr)
def test_probabilities_outside_zero_to_one_are_refused(fit: sy.Fit, probs: Any) -> None:
    first = probs[1] if isinstance(probs, list) else probs
    shown = f"{first:g}"
    refused(lambda: fit.base.quantile("mu", probs), ArgumentError, "probs", shown)
    refused(lambda: fit.base.table("mu", probs), ArgumentError, "probs", shown)
    refused(lambda: sy.weights.quantile([1, 2], [0, 0], probs), ArgumentError, "probs", shown)


@pytest.mark.parametrize("probs", ["half", None, [None], 1j, object()], ids=repr)
def test_probabilities_of_a_wrong_type_are_refused(fit: sy.Fit, probs: Any) -> None:
    refused(lambda: fit.base.quantile("mu", probs), ArgumentTypeError, "probs")
    refused(lambda: fit.base.table("mu", probs), ArgumentTypeError, "probs")


def test_no_probability_at_all_is_refused(fit: sy.Fit) -> None:
    refused(lambda: fit.base.quantile("mu", []), ArgumentError, "probs", "none")


def test_probabilities_given_twice_make_no_broken_table(fit: sy.Fit) -> None:
    refused(lambda: fit.base.table("mu", probs=(0.5, 0.5)), ArgumentError, "probs", "0.5")


@pytest.mark.parametrize("mass", [0, 1, -0.1, 95, np.nan, True, "most", None], ids=repr)
def test_masses_outside_zero_to_one_are_refused(fit: sy.Fit, mass: Any) -> None:
    refused(lambda: fit.base.interval("mu", mass), ArgumentError, "mass", repr(mass))


@pytest.mark.parametrize("kind", ["hdi", None, 1, "Central"], ids=repr)
def test_kinds_of_intervals_that_are_not_known_are_refused(fit: sy.Fit, kind: Any) -> None:
    refused(lambda: fit.base.interval("mu", kind=kind), ArgumentError, "kind", repr(kind))


@pytest.mark.parametrize(
    "of",
    [
        "median",
        None,
        ("quantile",),
        ("quantile", 2),
        ("quantile", "x"),
        ("quantile", np.nan),
        0.5,
        np.array([1, 2]),
        ["quantile", 0.5],
        ("quantile", 0),
        ("quantile", True),
    ],
    ids=repr,
)
def test_shifts_of_something_unknown_are_refused(fit: sy.Fit, of: Any) -> None:
    refused(lambda: fit.base.shift("mu", of), ArgumentError, "of")


@pytest.mark.parametrize("level", [0, 1, -0.5, 2, np.nan], ids=repr)
def test_levels_outside_zero_to_one_are_refused(fit: sy.Fit, level: float) -> None:
    refused(lambda: fit.base.prob("mu > 0.1", level), ArgumentError, "level")
    refused(lambda: fit.base.mean("mu").error_interval(level), ArgumentError, "level")


@pytest.mark.parametrize("level", ["high", True, [0.5], 1j], ids=repr)
def test_levels_of_a_wrong_type_are_refused(fit: sy.Fit, level: Any) -> None:
    refused(lambda: fit.base.prob("mu > 0.1", level), ArgumentTypeError, "level", repr(level))
    with pytest.raises(sy.errors.SteelyardError):
        fit.base.mean("mu").error_interval(level)


@pytest.mark.parametrize("backend", ["dask", 1, ""], ids=repr)
def test_frame_libraries_that_are_not_known_are_refused(fit: sy.Fit, backend: Any) -> None:
    refused(lambda: fit.base.table().to_frame(backend), ArgumentError, "backend", repr(backend))


def test_columns_that_a_table_does_not_have_are_refused(fit: sy.Fit) -> None:
    refused(lambda: fit.base.table()["median"], UnknownNameError, "column", "'median'", "mean")


def test_a_marginal_of_a_vector_is_not_drawn(fit: sy.Fit) -> None:
    refused(lambda: fit.base.plot.marginal("rate"), QuantityError, "quantity", "(3,)")
