"""What a table adds to single estimates: a joint band, paired shifts, the decision's side."""

from __future__ import annotations

import numpy as np
import pytest

import steelyard as sy
from steelyard.errors import SteelyardError

ROWS = 12
REPEATS = 120


def _answer(seed: int, tilt: float) -> tuple[sy.Answer, np.ndarray]:
    """Correlated normal draws tilted along the first; the means of the target are exact."""
    rng = np.random.default_rng(seed)
    lags = np.abs(np.subtract.outer(np.arange(ROWS), np.arange(ROWS)))
    covariance = 0.5**lags
    draws = rng.multivariate_normal(np.zeros(ROWS), covariance, size=(4, 150))
    return sy.weigh(tilt * draws[..., 0], {"rate": draws}), tilt * covariance[0]


def test_the_band_holds_all_rows_at_once() -> None:
    """
    A normal tilted by exp(t x₁) has the mean t Σ e₁: 120 repetitions, seeds 0 to 119.

    A band that holds 95 % stays within 0.87 and 1 but for one in 500 (0.95^120 = 0.002 above, four
    errors down); single intervals must do clearly worse: independent rows hold 0.95^12 = 0.54.
    """
    together, one_by_one = 0, 0
    for seed in range(REPEATS):
        answer, exact = _answer(seed, 0.5)
        table = answer.table("rate", probs=0.5)
        low, high = np.array(table["low"]), np.array(table["high"])
        together += bool(((low <= exact) & (exact <= high)).all())
        single = answer.mean("rate").error_interval(0.95)
        one_by_one += bool(((single[0] <= exact) & (exact <= single[1])).all())
    assert 0.87 <= together / REPEATS < 1
    assert one_by_one / REPEATS < 0.80


def test_a_single_row_has_the_single_interval() -> None:
    """One row needs no allowance for others; the bootstrap's own noise is cut at 95 %."""
    answer, _ = _answer(7, 0.2)
    table = answer.table("rate[0]", probs=0.5)
    width = table["high"][0] - table["low"][0]
    low, high = answer.mean("rate[0]").error_interval(0.95)
    # A thousand multipliers know a 95 % point to 1.4 % of levels: at most 1.2 times as wide.
    assert 0.999 * (high - low) <= width <= 1.2 * (high - low)


def test_shifts_are_those_of_the_answer_and_the_base_has_none() -> None:
    answer, _ = _answer(3, 0.5)
    table, shift = answer.table("rate"), answer.shift("rate")
    assert np.array_equal(table["shift"], shift.value)
    assert np.array_equal(table["shift_error"], shift.error)
    base = sy.Fit({"rate": np.random.default_rng(1).normal(size=(2, 50))}).base
    assert "shift" not in base.table().columns


def test_the_deciding_event_has_the_last_row() -> None:
    answer, _ = _answer(4, 0.5)
    table = answer.table("rate[1]", event="rate[0] > 0.4", level=0.45)
    single = answer.prob("rate[0] > 0.4", level=0.45)
    assert single.decision is not None
    assert table["quantity"] == ("rate[1]", "rate[0] > 0.4")
    assert table["mean"][1] == single.value
    assert table["right_side"] == (None, single.decision.right)
    assert table["needed"] == (None, 0.45)
    assert table["low"][1] < single.value < table["high"][1]
    assert "nan" not in str(table)


def test_an_event_that_no_draw_meets_has_no_value_and_no_side() -> None:
    answer, _ = _answer(5, 0.1)
    table = answer.table("rate[0]", event="rate[0] > 40", level=0.1)
    assert np.isnan(table["mean"][1])
    assert np.isnan(table["right_side"][1])
    assert table["level"][1] == "refit"


@pytest.mark.parametrize(
    "given",
    [{"event": "rate[0] > 0"}, {"level": 0.5}, {"event": "rate > 0", "level": 0.5}],
)
def test_an_event_and_its_level_go_together(given: dict[str, object]) -> None:
    answer, _ = _answer(6, 0.1)
    with pytest.raises(SteelyardError, match=r"event|level"):
        answer.table("rate[0]", **given)  # type: ignore[arg-type]
