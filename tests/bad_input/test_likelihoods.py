"""Log likelihoods that are not aligned with the draws, or hold what no log likelihood has."""

from __future__ import annotations

from typing import Any

import numpy as np
import pandas as pd
import polars as pl
import pytest
import xarray as xr

import steelyard as sy
from steelyard.errors import (
    ArgumentError,
    ArgumentTypeError,
    ChangeError,
    LikelihoodError,
    RatioError,
    ShapeError,
)

from .telling import refused

Draws = dict[str, np.ndarray]
Logliks = dict[str, np.ndarray]


@pytest.mark.parametrize("shape", [(199, 5), (3, 50, 5), (4, 49), (5,), (1, 200, 5)])
def test_a_log_likelihood_of_other_draws_is_refused_with_both_shapes(
    draws: Draws, shape: tuple[int, ...]
) -> None:
    act = lambda: sy.Fit(draws, loglik={"gauge A": np.zeros(shape)})  # noqa: E731
    refused(act, ShapeError, "loglik['gauge A']", shape, "(4, 50, …)", "(200, …)")


def test_swapped_axes_of_a_log_likelihood_are_named(draws: Draws, loglik: Logliks) -> None:
    swapped = np.swapaxes(loglik["gauge A"], 0, 1)
    told = refused(lambda: sy.Fit(draws, loglik=swapped), ShapeError, "loglik", "(50, 4, 5)")
    assert "swapped" in told.next_step


@pytest.mark.parametrize("shape", [(4, 50, 0), (200, 0), (4, 50, 3, 0)])
def test_a_log_likelihood_without_observations_is_refused(
    draws: Draws, shape: tuple[int, ...]
) -> None:
    refused(lambda: sy.Fit(draws, loglik=np.zeros(shape)), ShapeError, "loglik", shape)


def test_a_single_number_is_no_log_likelihood(draws: Draws) -> None:
    refused(lambda: sy.Fit(draws, loglik=-3.0), ShapeError, "loglik", "()")


@pytest.mark.parametrize(
    "source",
    [None, "gauge A", object(), np.zeros(200, dtype=bool)],
    ids=["None", "text", "object", "bool"],
)
def test_a_term_that_holds_no_numbers_is_refused(draws: Draws, source: Any) -> None:
    refused(
        lambda: sy.Fit(draws, loglik={"gauge A": source}), ArgumentTypeError, "loglik['gauge A']"
    )


@pytest.mark.parametrize("name", [3, "", ("a", "b")], ids=repr)
def test_a_term_whose_name_is_no_text_is_refused(draws: Draws, name: Any) -> None:
    refused(lambda: sy.Fit(draws, loglik={name: np.zeros(200)}), ArgumentTypeError, "loglik")


@pytest.mark.parametrize(
    "source",
    [pd.DataFrame(np.zeros((200, 3))), pl.DataFrame(np.zeros((200, 3))), pl.Series(np.zeros(200))],
    ids=["pandas", "polars", "polars series"],
)
def test_frames_are_no_log_likelihood_since_their_rows_may_be_in_any_order(
    draws: Draws, source: Any
) -> None:
    told = refused(
        lambda: sy.Fit(draws, loglik=source), ArgumentTypeError, "loglik", type(source).__name__
    )
    assert "to_numpy" in told.next_step


@pytest.mark.parametrize("bad", [np.nan, np.inf])
def test_a_value_that_no_log_likelihood_has_is_told_by_chain_draw_and_observation(
    draws: Draws, loglik: Logliks, bad: float
) -> None:
    broken = loglik["gauge A"].copy()
    broken[2, 7, 3] = bad
    fit = sy.Fit(draws, loglik={**loglik, "gauge A": broken})
    told = refused(
        lambda: fit.reweigh(sy.drop("gauge A")), LikelihoodError, "loglik['gauge A']", str(bad)
    )
    assert "chain 2, draw 7, observation 3" in told.came


def test_the_place_is_told_for_matrices_of_observations_and_stacked_draws() -> None:
    x = np.random.default_rng(1).normal(size=30)
    broken = np.zeros((30, 4, 2))
    broken[19, 3, 1] = np.nan
    fit = sy.Fit({"x": x}, loglik=broken)
    told = refused(lambda: fit.reweigh(sy.power(likelihood=0.5)), LikelihoodError, "loglik")
    assert "draw 19, observation 3, 1" in told.came


def test_the_place_of_a_bad_value_does_not_depend_on_blocks() -> None:
    # More than a million values, so that they are read in several blocks.
    x = np.random.default_rng(2).normal(size=(2, 3000))
    broken = np.zeros((2, 3000, 400), dtype=np.float32)
    broken[1, 2871, 399] = np.nan
    told = refused(
        lambda: sy.Fit({"x": x}, loglik=broken).reweigh(sy.power(likelihood=0.5)),
        LikelihoodError,
        "loglik",
    )
    assert "chain 1, draw 2871, observation 399" in told.came


def test_dropping_an_impossible_observation_is_refused_not_weighed(
    draws: Draws, loglik: Logliks
) -> None:
    # −L is +inf there: the base cannot have made that draw.
    broken = loglik["gauge A"].copy()
    broken[0, 5, 1] = -np.inf
    fit = sy.Fit(draws, loglik=broken)
    refused(lambda: fit.reweigh(sy.drop([1])), RatioError, "likelihood", "inf at chain 0, draw 5")


def test_an_added_observation_that_is_impossible_at_some_draws_is_a_weight_of_zero(
    draws: Draws,
) -> None:
    new = np.zeros((4, 50, 1))
    new[0, 5] = -np.inf
    answer = sy.Fit(draws, loglik=np.zeros((4, 50, 2))).reweigh(sy.add({"new": new}))
    assert answer.weights[0, 5] == 0
    assert np.isfinite(answer.mean("mu").value)


@pytest.mark.parametrize(
    ("source", "error", "shown"),
    [
        (lambda d: -1.0, ArgumentTypeError, "()"),
        (lambda d: None, ArgumentTypeError, "object"),
        (lambda d: d["mu"].astype(str), ArgumentTypeError, "<U"),
        (lambda d: np.zeros((7, 3)), ShapeError, "(7, 3)"),
        (lambda d: d["rate"].T, ShapeError, "(3, 1)"),
    ],
    ids=["number", "None", "text", "rows of its own", "draws last"],
)
def test_a_callable_that_gives_no_log_likelihood_is_refused_at_once(
    draws: Draws, source: Any, error: Any, shown: str
) -> None:
    refused(lambda: sy.Fit(draws, loglik={"gauge A": source}), error, "loglik['gauge A']", shown)


def test_a_callable_that_gives_other_observations_for_other_draws_is_refused(draws: Draws) -> None:
    fit = sy.Fit(draws, loglik=lambda d: np.zeros((len(d["mu"]), min(len(d["mu"]), 3))))
    refused(lambda: fit.reweigh(sy.power(likelihood=0.5)), ShapeError, "loglik", "3)", "1)")


def test_a_callable_that_gives_ragged_rows_is_refused(draws: Draws) -> None:
    refused(lambda: sy.Fit(draws, loglik=lambda d: [[0.0], [0.0, 1.0]]), ShapeError, "loglik")


def test_a_labelled_log_likelihood_without_a_draw_dimension_is_refused(draws: Draws) -> None:
    source = xr.DataArray(np.zeros((4, 50, 5)), dims=("chain", "step", "reading"))
    refused(lambda: sy.Fit(draws, loglik=source), LikelihoodError, "loglik", "'draw'", "step")


def test_a_likelihood_that_is_not_stated_cannot_be_changed(draws: Draws) -> None:
    for loglik in (None, {}):
        fit = sy.Fit(draws, loglik=loglik)
        for change in (
            sy.drop("gauge A"),
            sy.drop([0]),
            sy.power(likelihood=0.5),
            sy.weigh_data({"gauge A": 0.5}),
            sy.swap_loglik(np.zeros((4, 50))),
            sy.raise_noise("gauge A", 1.1, 0.01),
        ):
            told = refused(lambda c=change, f=fit: f.reweigh(c), LikelihoodError, "")
            assert "loglik" in told.next_step


def test_observations_of_a_total_cannot_be_told_apart(draws: Draws) -> None:
    fit = sy.Fit(draws, loglik={"gauge A": np.zeros((4, 50))})
    refused(lambda: fit.reweigh(sy.drop({"gauge A": [0]})), ChangeError, "drop", "total")
    refused(lambda: fit.reweigh(sy.raise_noise("gauge A", 1.1, 0.01)), ChangeError, "", "total")
    factors = sy.weigh_data({"gauge A": [0.5, 1.0]})
    refused(lambda: fit.reweigh(factors), ShapeError, "weigh_data['gauge A']", "(2,)", "()")


@pytest.mark.parametrize("sd", [0, -0.1, np.nan, np.inf], ids=str)
def test_a_noise_that_is_not_positive_is_refused(fit: sy.Fit, sd: float) -> None:
    refused(
        lambda: fit.reweigh(sy.raise_noise("gauge A", 1.2, sd)),
        ArgumentError,
        "raise_noise['gauge A']: sd",
        f"{sd:g}",
    )
