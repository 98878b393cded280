"""Log ratios that are none: NaN, +inf, −inf for every draw, or of a wrong shape."""

from __future__ import annotations

from typing import Any

import numpy as np
import pytest

import steelyard as sy
from steelyard.errors import ArgumentTypeError, DrawsError, RatioError, ShapeError

from .telling import refused


def _ratio(bad: float) -> np.ndarray:
    ratio = np.zeros((4, 50))
    ratio[1, 8] = ratio[3, 0] = bad
    return ratio


DOORS = {
    "array": lambda fit, ratio: fit.reweigh(sy.log_ratio(ratio)),
    "callable": lambda fit, ratio: fit.reweigh(sy.log_ratio(lambda d: ratio.reshape(-1))),
    "bare": lambda fit, ratio: sy.weigh(ratio),
    "bare with draws": lambda fit, ratio: sy.weigh(ratio, fit.draws),
}
DOOR = pytest.mark.parametrize("door", DOORS)


@DOOR
@pytest.mark.parametrize("bad", [np.nan, np.inf])
def test_nan_and_plus_infinity_are_refused_with_their_number_and_first_place(
    fit: sy.Fit, door: str, bad: float
) -> None:
    act = DOORS[door]
    told = refused(lambda: act(fit, _ratio(bad)), RatioError, "log ratio", "2 of 200", str(bad))
    assert "chain 1, draw 8" in told.came


@DOOR
def test_minus_infinity_for_every_draw_is_refused(fit: sy.Fit, door: str) -> None:
    act = DOORS[door]
    told = refused(
        lambda: act(fit, np.full((4, 50), -np.inf)), RatioError, "log ratio", "−inf for every draw"
    )
    assert "No draw lies in the target's support" in told.next_step


@DOOR
def test_minus_infinity_for_some_draws_is_a_weight_of_zero(fit: sy.Fit, door: str) -> None:
    answer = DOORS[door](fit, _ratio(-np.inf))
    assert np.count_nonzero(answer.weights == 0) == 2
    assert answer.weights.sum() == pytest.approx(1, abs=1e-12)


def test_two_terms_that_together_exclude_every_draw_are_refused(fit: sy.Fit) -> None:
    half = np.where(np.arange(200) < 100, 0.0, -np.inf)
    change = sy.log_ratio(half) & sy.log_ratio(half[::-1])
    refused(lambda: fit.reweigh(change), RatioError, "log ratio", "−inf for every draw")


def test_base_weights_that_exclude_all_that_the_ratio_keeps_are_refused(fit: sy.Fit) -> None:
    half = np.where(np.arange(200) < 100, 0.0, -np.inf)
    weighted = sy.Fit(fit.draws, log_weights=half)
    refused(lambda: weighted.reweigh(sy.log_ratio(half[::-1])), RatioError, "base weights", "−inf")


@pytest.mark.parametrize("shape", [(199,), (50, 4), (4, 49), ()])
def test_ratios_of_other_draws_are_refused(fit: sy.Fit, shape: tuple[int, ...]) -> None:
    ratio = np.zeros(shape)
    for act in (DOORS["array"], DOORS["bare with draws"]):
        refused(lambda a=act: a(fit, ratio), ShapeError, "log_ratio", shape, "(4, 50, …)")


@pytest.mark.parametrize("shape", [(4, 50, 3), (200, 3)])
def test_ratios_with_more_than_one_number_a_draw_are_refused(
    fit: sy.Fit, shape: tuple[int, ...]
) -> None:
    for act in (DOORS["array"], DOORS["bare with draws"]):
        with pytest.raises((ShapeError, RatioError)) as caught:
            act(fit, np.zeros(shape))
        assert "one number a draw" in caught.value.expected
        assert str(shape[-1]) in caught.value.came


@pytest.mark.parametrize("shape", [(0,), (1,), (), (0, 4), (1, 1), (2, 3, 4), (50, 4)])
def test_bare_ratios_that_are_no_draws_are_refused(shape: tuple[int, ...]) -> None:
    told = refused(lambda: sy.weigh(np.zeros(shape)), DrawsError, "log_ratio")
    assert str(shape) in told.came or "chains of" in told.came


@pytest.mark.parametrize("ratio", [None, "log ratio", object(), [None, 1.0]], ids=str)
def test_ratios_of_a_wrong_type_are_refused(fit: sy.Fit, ratio: Any) -> None:
    for act in (DOORS["array"], DOORS["bare"], DOORS["bare with draws"]):
        refused(lambda a=act: a(fit, ratio), ArgumentTypeError, "log_ratio")


@pytest.mark.parametrize(
    ("source", "error", "shown"),
    [
        (lambda d: 0.0, ShapeError, "()"),
        (lambda d: d["mu"][:-1], ShapeError, "(199,)"),
        (lambda d: d["rate"], ShapeError, "(200, 3)"),
        (lambda d: d["mu"].astype(str), ArgumentTypeError, "<U"),
        (lambda d: None, ArgumentTypeError, "object"),
        (lambda d: [[0.0], [0.0, 1.0]], ShapeError, "ragged"),
    ],
    ids=["number", "too short", "vector", "text", "None", "ragged"],
)
def test_a_callable_that_gives_no_log_ratio_is_refused(
    fit: sy.Fit, source: Any, error: Any, shown: str
) -> None:
    refused(lambda: fit.reweigh(sy.log_ratio(source)), error, "log_ratio", shown)


def test_an_error_inside_a_callable_is_the_users_own(fit: sy.Fit) -> None:
    def broken(draws: Any) -> Any:
        raise ZeroDivisionError("mine")

    for change in (sy.log_ratio(broken), sy.swap_prior(mu=broken)):
        with pytest.raises(ZeroDivisionError, match="mine"):
            fit.reweigh(change)
    with pytest.raises(ZeroDivisionError, match="mine"):
        fit.base.mean(broken)


def test_a_parameter_that_a_callable_asks_for_in_vain_is_told(fit: sy.Fit) -> None:
    with pytest.raises(KeyError, match="nu"):
        fit.reweigh(sy.log_ratio(lambda draws: draws["nu"]))
