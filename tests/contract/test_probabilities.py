"""Probabilities of events: bounds where no draw lies, decisions, and the texts of events."""

from __future__ import annotations

from typing import Any

import numpy as np
import pytest
from scipy import stats

import steelyard as sy

X = np.random.default_rng(20_261_237).normal(size=(4, 250))


@pytest.fixture(scope="module")
def fit() -> sy.Fit:
    rng = np.random.default_rng(20_261_238)
    draws = {"x": X, "rate": rng.normal(size=(4, 250, 3)), "gauge A": rng.normal(size=(4, 250))}
    return sy.Fit(draws, {"x": sy.Normal(0, 2)}, ordered=False)


EVENTS: list[tuple[str, Any]] = [
    ("x > 0.3", lambda d: d["x"] > 0.3),
    ("x>=0.3", lambda d: d["x"] >= 0.3),
    ("0.3 < x", lambda d: d["x"] > 0.3),
    ("x < 0.3 or x > 1", lambda d: (d["x"] < 0.3) | (d["x"] > 1)),
    ("not x < 0.3", lambda d: d["x"] >= 0.3),
    ("not (x < 0.3 and x > -1)", lambda d: ~((d["x"] < 0.3) & (d["x"] > -1))),
    ("-1 < x <= 0.3", lambda d: (d["x"] > -1) & (d["x"] <= 0.3)),
    (
        "x > 0 or x < -1 and rate[0] > 0",
        lambda d: (d["x"] > 0) | ((d["x"] < -1) & (d["rate"][:, 0] > 0)),
    ),
    ("x ** 2 > 0.5", lambda d: d["x"] ** 2 > 0.5),
    ("-x ** 2 < -0.5", lambda d: -(d["x"] ** 2) < -0.5),
    ("2 ** 3 ** 2 * x > 100", lambda d: 512 * d["x"] > 100),
    ("x - 1 - 1 > -2", lambda d: d["x"] - 1 - 1 > -2),
    ("1 / 2 / 2 < x", lambda d: d["x"] > 0.25),
    ("2 + 3 * x > 2.9", lambda d: 2 + 3 * d["x"] > 2.9),
    ("(2 + 3) * x > 1", lambda d: 5 * d["x"] > 1),
    ("--x > .3e0", lambda d: d["x"] > 0.3),
    ("x * rate[1] > 1e-1", lambda d: d["x"] * d["rate"][:, 1] > 0.1),
    ("rate > 0.3", lambda d: d["rate"] > 0.3),
    ("rate > x", lambda d: d["rate"] > d["x"][:, None]),
    ("rate - x > 0 and x > 0", lambda d: (d["rate"] > d["x"][:, None]) & (d["x"] > 0)[:, None]),
    ('"gauge A" > 0.1', lambda d: d["gauge A"] > 0.1),
    ("'gauge A' + x != 0", lambda d: d["gauge A"] + d["x"] != 0),
    ("  x\t>\n0.3 ", lambda d: d["x"] > 0.3),
]


@pytest.mark.parametrize(("text", "same"), EVENTS)
def test_a_text_means_what_it_means_in_python(fit: sy.Fit, text: str, same: Any) -> None:
    one, other = fit.base.prob(text), fit.base.prob(same)
    assert np.array_equal(one.value, other.value, equal_nan=True)
    assert np.array_equal(one.error, other.error, equal_nan=True)
    assert one.label == text


def test_arrays_and_callables_are_events_by_draw_or_by_chain(fit: sy.Fit) -> None:
    want = float(np.mean(X > 0.3))
    for event in (X > 0.3, (X > 0.3).ravel(), (X > 0.3).tolist(), lambda d: X > 0.3):
        assert fit.base.prob(event).value == pytest.approx(want, abs=1e-12)


def test_a_mapping_of_events_gives_a_mapping_of_probabilities(fit: sy.Fit) -> None:
    found = fit.base.prob({"low": "x < 0", "high": lambda d: d["x"] > 1}, level=0.4)
    assert list(found) == ["low", "high"]
    assert found["low"].value == pytest.approx(np.mean(X < 0), abs=1e-12)
    assert all(e.decision is not None for e in found.values())


def test_no_draw_in_the_event_gives_no_value_but_a_bound(fit: sy.Fit) -> None:
    estimate = fit.base.prob("x > 9")
    assert np.isnan(estimate.value)
    assert np.isnan(estimate.error)
    # 3/ESS for 1,000 draws without order and a ratio of one; 1e-12 relative.
    assert estimate.upper_bound == pytest.approx(0.003, rel=1e-12)
    assert estimate.lower_bound is None
    assert estimate.verdict.level == "refit"
    assert "below 0.003" in str(estimate)


def test_no_draw_outside_the_event_gives_a_lower_bound(fit: sy.Fit) -> None:
    estimate = fit.base.prob("x < 9")
    assert np.isnan(estimate.value)
    assert estimate.lower_bound == pytest.approx(0.997, rel=1e-12)
    assert estimate.upper_bound is None
    assert "above 0.997" in str(estimate)


def test_an_event_with_draws_on_both_sides_has_no_bounds(fit: sy.Fit) -> None:
    estimate = fit.base.prob("x > 0")
    assert estimate.upper_bound is None
    assert estimate.lower_bound is None


@pytest.mark.parametrize(
    ("old", "new"),
    [
        (sy.Normal(0, 2), sy.Normal(0.3, 1.5)),
        (sy.Normal(0, 2), sy.Normal(-1, 1)),
        (sy.Gamma(2, 1), sy.Gamma(3, 2)),
        (sy.Beta(2, 2), sy.Beta(3, 4)),
        (sy.HalfNormal(2), sy.HalfNormal(1)),
    ],
    ids=str,
)
def test_the_bound_under_a_changed_prior_grows_by_the_largest_ratio(old: Any, new: Any) -> None:
    rng = np.random.default_rng(1)
    x = rng.normal(size=1000) if isinstance(old, sy.Normal) else rng.beta(3, 3, size=1000)
    fit = sy.Fit({"x": x}, {"x": old}, ordered=False)
    answer = fit.reweigh(sy.swap_prior(x=new))
    low, high = (float(v) for v in old.support())
    grid = np.linspace(max(low, -12), min(high, 12), 2_000_001)[1:-1]
    largest = np.exp(np.max(new.log_density(grid) - old.log_density(grid)))
    constant = np.exp(answer.log_evidence_ratio.value)
    bound = answer.prob(lambda d: d["x"] > 99).upper_bound
    # 1e-6 relative: the maximum over a grid of two million points.
    assert bound == pytest.approx(3 / 1000 * largest / constant, rel=1e-6)


def test_where_the_largest_ratio_is_not_known_there_is_no_bound(fit: sy.Fit) -> None:
    for change in (
        sy.swap_prior(x=sy.Normal(0, 3)),
        sy.swap_prior(x=sy.StudentT(4, 0, 1)),
        sy.log_ratio(lambda d: d["x"]),
    ):
        estimate = fit.reweigh(change).prob("x > 9")
        assert np.isnan(estimate.upper_bound)
        assert "no bound" in str(estimate)


def test_bounds_of_an_array_stand_where_they_are_needed(fit: sy.Fit) -> None:
    estimate = fit.base.prob(lambda d: d["rate"] > np.array([0.0, 9.0, -9.0]))
    assert np.isnan(estimate.value).tolist() == [False, True, True]
    assert np.isnan(estimate.upper_bound).tolist() == [True, False, True]
    assert np.isnan(estimate.lower_bound).tolist() == [True, True, False]


def test_a_decision_tells_its_side_and_how_surely(fit: sy.Fit) -> None:
    estimate = fit.base.prob("x > 0.3", level=0.37)
    decision = estimate.decision
    assert decision is not None
    assert decision.level == 0.37
    assert decision.above is bool(estimate.value > 0.37)
    want = stats.t.cdf(abs(estimate.value - 0.37) / estimate.error, estimate.degrees)
    # 1e-10: two distribution functions of Student's t, through incomplete beta functions.
    assert decision.right == pytest.approx(want, abs=1e-10)
    assert 0.5 <= decision.right <= 1


def test_a_decision_of_an_array_has_its_shape(fit: sy.Fit) -> None:
    decision = fit.base.prob("rate > 0.3", level=0.4).decision
    assert decision is not None
    assert decision.above.shape == decision.right.shape == (3,)
    assert decision.above.dtype == np.bool_
    assert "of 3 above 0.4" in str(decision)


def test_without_a_level_there_is_no_decision(fit: sy.Fit) -> None:
    assert fit.base.prob("x > 0.3").decision is None


def test_how_surely_is_withheld_where_the_estimate_is_not_sound(fit: sy.Fit) -> None:
    for event in ("x > 9", "x > 2.9"):
        estimate = fit.base.prob(event, level=0.5)
        assert estimate.verdict.level < "sound"
        assert np.isnan(estimate.decision.right)
        assert "not known" in str(estimate.decision)


def test_the_shift_of_an_event_is_the_shift_of_its_probability(fit: sy.Fit) -> None:
    answer = fit.reweigh(sy.log_ratio(lambda d: 0.3 * d["x"]))
    shift = answer.shift("x > 0.3")
    want = answer.prob("x > 0.3").value - fit.base.prob("x > 0.3").value
    assert shift.value == pytest.approx(want, abs=1e-12)
    assert shift.error < answer.prob("x > 0.3").error
