"""Estimates: what they hold, how they print, and what they turn into."""

from __future__ import annotations

import re
from typing import Any

import numpy as np
import pytest
import xarray as xr
from scipy import stats

import steelyard as sy


def _estimate(value: float, error: float) -> sy.Estimate:
    plain = sy.weigh(np.zeros(400)).mean(np.random.default_rng(1).normal(size=400))
    return sy.Estimate(value, error, 0.1, plain.verdict, 100.0, label="mu")


@pytest.mark.parametrize(
    ("value", "error", "printed"),
    [
        (0.123456, 0.00312, "0.123 ± 0.003"),
        (0.123456, 0.00162, "0.1235 ± 0.0016"),
        (0.123456, 0.0196, "0.12 ± 0.02"),
        (1234.56, 31.2, "1230 ± 30"),
        (1234.56, 0.96, "1234.6 ± 1.0"),
        (-0.0299, 0.003, "-0.030 ± 0.003"),
        (1e-7, 2e-9, "0.000000100 ± 0.000000002"),
        (5.0, 0.0, "5 ± 0"),
        (0.1, np.inf, "0.1 ± inf"),
    ],
)
def test_an_estimate_prints_only_digits_that_its_error_supports(
    value: float, error: float, printed: str
) -> None:
    assert str(_estimate(value, error)) == f"mu: {printed} (sound)"


@pytest.mark.parametrize("value", [-0.001, 0.001, -1e-12])
def test_an_estimate_within_its_error_of_zero_prints_no_negative_zero(value: float) -> None:
    assert "-0.00" not in str(_estimate(value, 0.03))


def test_printed_digits_follow_the_error_whatever_its_size() -> None:
    rng = np.random.default_rng(1)
    for _ in range(300):
        error = float(10 ** rng.uniform(-8, 5))
        value = float(rng.normal() * error * 10 ** rng.uniform(-1, 4))
        text = str(_estimate(value, error)).split(": ")[1].split(" (")[0]
        shown, told = (float(part) for part in text.split(" ± "))
        # One digit of an error, or two that begin with 1: rounded by at most a third of itself,
        # and the value by at most half of the error's last digit.
        assert told == pytest.approx(error, rel=0.34)
        assert abs(shown - value) <= 0.51 * error


def test_a_vector_prints_one_line_an_element_and_a_long_one_its_counts(
    answer: sy.Answer,
) -> None:
    lines = str(answer.mean("rate")).splitlines()
    assert len(lines) == 10
    assert all(re.search(r"±.*\((sound|strained|refit)\)$", line) for line in lines[1:])
    long = answer.mean(np.random.default_rng(2).normal(size=(4, 100, 60)))
    assert len(str(long).splitlines()) == 1
    assert "(60,)" in str(long)


def test_an_estimate_is_frozen_and_its_arrays_are_read_only(answer: sy.Answer) -> None:
    estimate = answer.mean("rate")
    with pytest.raises(AttributeError):
        estimate.value = 0  # type: ignore[misc]
    found = answer.prob(lambda d: d["rate"] > 0.1, level=0.5)
    none = answer.prob(lambda d: d["rate"] > 9)
    assert found.decision is not None
    for array in (
        estimate.value,
        estimate.error,
        estimate.tail_shape,
        estimate.effective_draws,
        estimate.verdict.level,
        found.decision.above,
        found.decision.right,
        none.upper_bound,
    ):
        assert isinstance(array, np.ndarray)
        assert not array.flags.writeable


@pytest.mark.parametrize("level", [0.5, 0.9, 0.95, 0.999999])
def test_an_error_interval_is_the_value_with_student_quantiles_of_its_error(
    answer: sy.Answer, level: float
) -> None:
    for name in ("mu", "rate"):
        estimate = answer.mean(name)
        t = stats.t.ppf(0.5 + level / 2, estimate.degrees)
        want = np.stack([estimate.value - t * estimate.error, estimate.value + t * estimate.error])
        got = estimate.error_interval(level)
        assert got.shape == (2, *np.shape(estimate.value))
        # 1e-9: the quantile is found by halving; beyond 1e6 degrees it is the normal one to 1e-6
        # of its distance from the value.
        np.testing.assert_allclose(got, want, rtol=1e-9, atol=1e-6 * np.max(estimate.error))


def test_an_error_interval_is_of_95_per_cent_unasked(answer: sy.Answer) -> None:
    estimate = answer.mean("mu")
    assert np.array_equal(estimate.error_interval(), estimate.error_interval(0.95))


def _labelled_fit() -> sy.Fit:
    rate = np.random.default_rng(3).normal(size=(2, 50, 3))
    coords = {"quay": ["east", "north", "west"]}
    return sy.Fit(xr.Dataset({"rate": (("chain", "draw", "quay"), rate)}, coords=coords))


def test_an_estimate_becomes_a_dataset_with_its_labels() -> None:
    estimate = _labelled_fit().base.mean("rate")
    data = estimate.to_xarray()
    assert data.attrs["quantity"] == "rate"
    assert data["quay"].values.tolist() == ["east", "north", "west"]
    for name in ("value", "error", "tail_shape", "effective_draws"):
        assert data[name].dims == ("quay",)
        assert np.array_equal(data[name].values, getattr(estimate, name))
    assert data["level"].values.tolist() == ["sound"] * 3


@pytest.mark.parametrize(
    ("ask", "dims"),
    [
        (lambda base: base.mean("rate[east]"), ()),
        (lambda base: base.quantile("rate", (0.1, 0.9)), ("quantile", "quay")),
        (lambda base: base.interval("rate"), ("interval", "quay")),
        (lambda base: base.quantile("rate[east]", 0.5), ()),
    ],
    ids=["number", "quantiles", "interval", "one quantile"],
)
def test_dimensions_of_a_dataset_are_those_of_the_estimate(ask: Any, dims: tuple[str, ...]) -> None:
    estimate = ask(_labelled_fit().base)
    data = estimate.to_xarray()
    assert data["value"].dims == dims
    assert np.array_equal(data["value"].values, estimate.value)


def test_quantiles_and_limits_of_a_dataset_say_which_they_are() -> None:
    base = _labelled_fit().base
    quantiles = base.quantile("rate", (0.1, 0.9)).to_xarray()
    assert quantiles["quantile"].values.tolist() == [0.1, 0.9]
    interval = base.interval("rate").to_xarray()
    assert len(set(interval["interval"].values.tolist())) == 2


def test_dimensions_without_a_name_get_one(answer: sy.Answer) -> None:
    data = answer.mean("loss").to_xarray()
    assert data["value"].shape == (2, 3)
    assert len(set(data["value"].dims)) == 2


@pytest.mark.parametrize("name", ["mu", "rate"])
def test_estimates_show_themselves_in_notebooks(answer: sy.Answer, name: str) -> None:
    estimate = answer.mean(name)
    assert estimate._repr_html_().startswith("<")
    assert repr(estimate).startswith("<Estimate ")
    assert name in str(estimate)


def test_a_label_with_markup_is_escaped(answer: sy.Answer) -> None:
    estimate = answer.mean({"<b>x</b>": "mu"})["<b>x</b>"]
    assert "<b>" not in estimate._repr_html_()


def test_estimates_may_stand_in_sets_and_mappings(answer: sy.Answer) -> None:
    one, other = answer.mean("mu"), answer.mean("tau")
    assert len({one, other, one}) == 2
    assert {one: "mu", other: "tau"}[one] == "mu"


def test_a_value_may_be_compared_by_hand(answer: sy.Answer) -> None:
    estimate = answer.mean("mu")
    assert estimate.value == pytest.approx(0.1, abs=0.05)
    assert bool(answer.mean("rate").value[0] > -1)
