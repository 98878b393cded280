"""Event texts that do not parse, name what is not there, or try to be code."""

from __future__ import annotations

from typing import Any

import numpy as np
import pytest

import steelyard as sy
from steelyard.errors import QuantityError, ShapeError, UnknownNameError

from .telling import refused

# A text, and the position at which it stops being an event.
BROKEN = [
    ("mu >", 4),
    ("mu > 0.1 and", 12),
    ("> 0.1", 0),
    ("mu > 0.1)", 8),
    ("(mu > 0.1", 9),
    ("mu > 0.1 0.2", 9),
    ("mu mu > 0.1", 3),
    ("mu > 0.1 & tau > 0", 9),
    ("mu > 0.1 | tau > 0", 9),
    ("mu > 0.1; tau", 8),
    ("mu > 0.1 # note", 9),
    ("mu => 0.1", 3),
    ("mu > 1e", 6),
    ("mu > 0x1f", 6),
    ("mu > 0.1 or or tau > 0", 12),
    ("mu >> 0.1", 4),
    ("mu > tau < ", 11),
    ("rate[0 > 0.1", 4),
    ("rate[[0]] > 0.1", 4),
    ("mu > 0.1 if tau > 0 else tau", 9),
    ("mu ^ 2 > 0.1", 3),
    ("mu % 2 > 0.1", 3),
    ("mu // 2 > 0.1", 4),
    ("~(mu > 0.1)", 0),
    ("mu > 'east", 5),
    ("mu if mu else 1", 3),
    ("lambda: 1", 6),
    ("mu is 0", 3),
    ("[m for m in mu]", 0),
    ("not", 3),
    ("", 0),
]


@pytest.mark.parametrize(("text", "position"), BROKEN)
def test_texts_that_do_not_parse_are_refused_with_the_position(
    fit: sy.Fit, text: str, position: int
) -> None:
    refused(lambda: fit.base.prob(text), QuantityError, "event", f"position {position} ", text)


@pytest.mark.parametrize(
    ("text", "name"),
    [
        ("nu > 0.1", "nu"),
        ("mu > 0.1 and sigma < 2", "sigma"),
        ("rate[3] > 0.1", "rate[3]"),
        ("rate[-1] > 0.1", "-1"),
        ('"gauge A" > 0.1', "gauge A"),
        ("mu.real > 0.1", "mu.real"),
        ("mu.__class__ == 1", "mu.__class__"),
        ("True > mu", "True"),
        ("nan > mu", "nan"),
    ],
)
def test_names_that_are_not_there_are_refused_with_their_position(
    fit: sy.Fit, text: str, name: str
) -> None:
    told = refused(lambda: fit.base.prob(text), UnknownNameError, "position")
    assert name in told.came or name in told.argument


@pytest.mark.parametrize(
    "text",
    [
        "__import__('os').system('true') > 0",
        "(lambda: 1)() > 0",
        "[x for x in mu] > 0",
        "mu.sum() > 0",
        "abs(mu) > 0",
        "max(mu, tau) > 0",
        "mu[mu > 0] > 0",
        "exec('1') == 1",
        "f'{mu}' > 0",
        "mu := 1 > 0",
        "{mu} > 0",
        "mu > 0\nimport os",
        "mu @ mu > 0",
        "print(mu) == 1",
    ],
)
def test_code_is_never_run(fit: sy.Fit, text: str, capsys: pytest.CaptureFixture[str]) -> None:
    with pytest.raises((QuantityError, UnknownNameError)) as caught:
        fit.base.prob(text)
    assert "event" in caught.value.argument
    assert capsys.readouterr().out == ""


@pytest.mark.parametrize("text", ["", "  ", "mu", "mu + tau", "0.1", "mu = 0.1", "mu and tau"])
def test_texts_that_compare_nothing_are_refused(fit: sy.Fit, text: str) -> None:
    refused(lambda: fit.base.prob(text), QuantityError, "event", repr(text))


@pytest.mark.parametrize(
    "text", ["mu > 0.1 and tau", "not mu", "(mu > 0.1) + 1 > 0", "(mu > 0) > 0", "-(mu > 0) < 1"]
)
def test_truths_and_numbers_are_not_mixed(fit: sy.Fit, text: str) -> None:
    refused(lambda: fit.base.prob(text), QuantityError, "event")


def test_a_single_equals_sign_is_said_to_be_one(fit: sy.Fit) -> None:
    told = refused(lambda: fit.base.prob("mu = 0.1"), QuantityError, "event")
    assert "==" in str(told)


def test_events_that_name_no_parameter_are_refused(fit: sy.Fit) -> None:
    with pytest.raises(sy.errors.SteelyardError) as caught:
        fit.base.prob("1 > 0")
    assert "event" in caught.value.argument


@pytest.mark.parametrize(
    "text",
    [
        "-" * 5000 + "mu > 0",
        "2**" * 5000 + "mu > 0",
        "(" * 5000 + "mu > 0" + ")" * 5000,
        "not " * 5000 + "mu > 0",
        "(" * 5000,
    ],
    ids=["minus", "power", "brackets", "not", "open"],
)
def test_texts_nested_beyond_reason_are_refused_without_a_crash(fit: sy.Fit, text: str) -> None:
    with pytest.raises(QuantityError) as caught:
        fit.base.prob(text)
    assert len(str(caught.value)) < 500, "the whole text is quoted"


def test_long_flat_texts_are_fine(fit: sy.Fit) -> None:
    text = " and ".join(["mu < 9"] * 2000)
    assert fit.base.prob(text).lower_bound is not None


@pytest.mark.parametrize(
    "text", ["(mu - 5) ** 0.5 > 1", "(mu - mu) / (mu - mu) > 1", "1e999 - 1e999 < mu"]
)
def test_arithmetic_without_a_value_at_some_draw_is_refused(fit: sy.Fit, text: str) -> None:
    refused(lambda: fit.base.prob(text), QuantityError, "event", "NaN")


def test_parameters_of_shapes_that_do_not_go_together_are_refused() -> None:
    rng = np.random.default_rng(1)
    fit = sy.Fit({"a": rng.normal(size=(4, 50, 2)), "b": rng.normal(size=(4, 50, 3))})
    refused(lambda: fit.base.prob("a > b"), QuantityError, "event", "(2,)", "(3,)")


def test_a_vector_as_long_as_the_chain_is_compared_draw_by_draw() -> None:
    # n equals the length of the vector: broadcasting from the right would pair the wrong axes.
    rng = np.random.default_rng(2)
    mu, rate = rng.normal(size=30), rng.normal(size=(30, 30))
    fit = sy.Fit({"mu": mu, "rate": rate}, chain=np.zeros(30, dtype=int))
    want = (rate > mu[:, None]).mean(axis=0)
    got = fit.base.prob("rate > mu")
    settled = (want > 0) & (want < 1)
    # 1e-12: a mean of 30 zeros and ones.
    np.testing.assert_allclose(np.asarray(got.value)[settled], want[settled], atol=1e-12)


@pytest.mark.parametrize(
    ("event", "error"),
    [
        (np.ones((4, 50)), QuantityError),
        (np.ones((4, 50), dtype=int), QuantityError),
        (lambda d: d["mu"], QuantityError),
        (lambda d: 1, QuantityError),
        (np.ones((4, 49), dtype=bool), ShapeError),
        (lambda d: d["mu"][:-1] > 0, ShapeError),
        (lambda d: True, ShapeError),
        (True, ShapeError),
    ],
    ids=[
        "floats",
        "integers",
        "callable of floats",
        "one",
        "short",
        "short callable",
        "always",
        "True",
    ],
)
def test_events_that_are_not_true_or_false_for_each_draw_are_refused(
    fit: sy.Fit, event: Any, error: Any
) -> None:
    refused(lambda: fit.base.prob(event), error, "event")


@pytest.mark.parametrize("event", [None, 5, object(), {}], ids=repr)
def test_things_that_are_no_event_are_refused(fit: sy.Fit, event: Any) -> None:
    with pytest.raises(sy.errors.SteelyardError) as caught:
        fit.base.prob(event)
    assert "event" in caught.value.argument
