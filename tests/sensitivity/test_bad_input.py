"""Bad input: which argument, what was expected, what came, what to do."""

from __future__ import annotations

from collections.abc import Callable
from typing import Any

import numpy as np
import pytest

import steelyard as sy
from steelyard.errors import (
    ArgumentError,
    ArgumentTypeError,
    PriorError,
    QuantityError,
    SteelyardError,
    UnknownNameError,
)
from steelyard.sensitivity import (
    least_data,
    least_perturbation,
    prior_factors,
    resistance,
    statements,
    sweep,
    tipping_point,
    worst_case,
)

from . import cases

BASE = cases.quays()._record
EVENT = "mu > 0.1"


def _scale(scale: float) -> Any:
    return sy.swap_prior(tau=sy.HalfNormal(scale))


def _raises(scale: float) -> Any:
    raise ZeroDivisionError("by nothing")


def _sometimes(scale: float) -> Any:
    return _scale(scale) if scale < 0.04 else None


REFUSED: dict[str, tuple[Callable[[], Any], type[SteelyardError], str, str]] = {
    "no family": (lambda: sweep(BASE, 3, [1, 2]), ArgumentTypeError, "family", "int"),
    "family gives no change": (
        lambda: sweep(BASE, _sometimes, [0.03, 0.05]),
        ArgumentTypeError,
        "family at scale = 0.05",
        "NoneType",
    ),
    "family raises": (
        lambda: sweep(BASE, _raises, [0.03, 0.05]),
        ArgumentError,
        "family at scale = 0.03",
        "ZeroDivisionError: by nothing",
    ),
    "family of an unknown term": (
        lambda: sweep(BASE, lambda s: sy.swap_prior(tua=sy.HalfNormal(s)), [0.03, 0.05]),
        UnknownNameError,
        "family at s = 0.03",
        "tua",
    ),
    "one node": (lambda: sweep(BASE, _scale, [0.03]), ArgumentError, "grid['scale']", "(1,)"),
    "unsorted": (lambda: sweep(BASE, _scale, [0.1, 0.03]), ArgumentError, "grid", "ascending"),
    "a node twice": (lambda: sweep(BASE, _scale, [0.1, 0.1]), ArgumentError, "grid", "once"),
    "not finite": (lambda: sweep(BASE, _scale, [0.1, np.inf]), ArgumentError, "grid", "finite"),
    "three axes": (
        lambda: sweep(BASE, _scale, {"a": [1, 2], "b": [1, 2], "c": [1, 2]}),
        ArgumentError,
        "grid",
        "3",
    ),
    "a million nodes": (
        lambda: sweep(BASE, _scale, {"a": np.arange(1000), "b": np.arange(1000)}),
        ArgumentError,
        "grid",
        "1,000,000",
    ),
    "outside the domain": (
        lambda: sweep(BASE, _scale, [-0.1, 0.1]),
        ArgumentError,
        "family at scale = -0.1",
        "HalfNormal: scale",
    ),
    "a quantity called like the axis": (
        lambda: sweep(BASE, _scale, {"mu": [0.1, 0.2]}, "mu"),
        ArgumentError,
        "grid",
        "mu",
    ),
    "a text as grid": (lambda: sweep(BASE, _scale, "abc"), ArgumentTypeError, "grid", "dtype"),
    "tipping: level": (
        lambda: tipping_point(BASE, _scale, EVENT, 1.0, (0.01, 0.1)),
        ArgumentError,
        "level",
        "1.0",
    ),
    "tipping: level as text": (
        lambda: tipping_point(BASE, _scale, EVENT, "0.8", (0.01, 0.1)),
        ArgumentTypeError,
        "level",
        "'0.8'",
    ),
    "tipping: event never": (
        lambda: tipping_point(BASE, _scale, "mu > 5", 0.8, (0.01, 0.1)),
        QuantityError,
        "event",
        "none in it",
    ),
    "tipping: event always": (
        lambda: tipping_point(BASE, _scale, "mu < 5", 0.8, (0.01, 0.1)),
        QuantityError,
        "event",
        "all in it",
    ),
    "tipping: many events": (
        lambda: tipping_point(BASE, _scale, "rate > 0.1", 0.8, (0.01, 0.1)),
        QuantityError,
        "event",
        "(4,)",
    ),
    "tipping: range": (
        lambda: tipping_point(BASE, _scale, EVENT, 0.8, (0.1, 0.01)),
        ArgumentError,
        "between",
        "0.1 and 0.01",
    ),
    "tipping: half a range": (
        lambda: tipping_point(BASE, _scale, EVENT, 0.8, (0.1,)),
        ArgumentError,
        "between",
        "0.1",
    ),
    "tipping: start outside": (
        lambda: tipping_point(BASE, _scale, EVENT, 0.8, (0.01, 0.1), 0.5),
        ArgumentError,
        "start",
        "0.5",
    ),
    "tipping: no family": (
        lambda: tipping_point(BASE, None, EVENT, 0.8, (0.01, 0.1)),
        ArgumentTypeError,
        "family",
        "NoneType",
    ),
    "no class": (lambda: worst_case(BASE, "mu"), ArgumentError, "worst_case", "none"),
    "two classes": (
        lambda: worst_case(BASE, "mu", divergence=1.0, ratio=2.0),
        ArgumentError,
        "worst_case",
        "divergence=δ and ratio=R",
    ),
    "contamination of no prior": (
        lambda: worst_case(BASE, "mu", contamination=0.1),
        ArgumentError,
        "prior_of",
        "None",
    ),
    "contamination by all": (
        lambda: worst_case(BASE, "mu", contamination=1.0, prior_of="mu"),
        ArgumentError,
        "contamination",
        "1",
    ),
    "contamination of a hierarchy": (
        lambda: worst_case(BASE, "mu", contamination=0.1, prior_of="rate"),
        PriorError,
        "prior_of",
        "Normal",
    ),
    "a ball of nothing": (
        lambda: worst_case(BASE, "mu", divergence=0.0),
        ArgumentError,
        "divergence",
        "0",
    ),
    "a ratio of one": (lambda: worst_case(BASE, "mu", ratio=1), ArgumentError, "ratio", "1"),
    "a ratio without end": (
        lambda: worst_case(BASE, "mu", ratio=np.inf),
        ArgumentError,
        "ratio",
        "inf",
    ),
    "a ratio as text": (
        lambda: worst_case(BASE, "mu", ratio="2"),
        ArgumentTypeError,
        "ratio",
        "'2'",
    ),
    "a vector's worst case": (
        lambda: worst_case(BASE, "rate", ratio=2),
        QuantityError,
        "quantity",
        "(4,)",
    ),
    "a constant": (
        lambda: worst_case(BASE, np.ones(1000), ratio=2),
        QuantityError,
        "quantity",
        "1 at every",
    ),
    "a target out of reach": (
        lambda: least_perturbation(BASE, "mu", 5.0),
        ArgumentError,
        "target",
        "5",
    ),
    "a target as text": (
        lambda: least_perturbation(BASE, "mu", "5"),
        ArgumentTypeError,
        "target",
        "'5'",
    ),
    "an unknown prior": (
        lambda: least_perturbation(BASE, "mu", 0.1, "tua"),
        UnknownNameError,
        "prior_of",
        "tua",
    ),
    "a hierarchy's prior": (
        lambda: least_perturbation(BASE, "mu", 0.1, "rate"),
        PriorError,
        "prior_of",
        "Normal",
    ),
    "no prior": (
        lambda: least_perturbation(sy.Fit({"x": np.arange(9.0)})._record, "x", 3.0, "x"),
        PriorError,
        "prior_of",
        "without prior",
    ),
    "resistance at one": (lambda: resistance(BASE, EVENT, 1), ArgumentError, "level", "1"),
    "resistance of the certain": (
        lambda: resistance(BASE, "mu < 5", 0.5),
        QuantityError,
        "event",
        "all in it",
    ),
    "no statement": (lambda: statements(BASE, {}), ArgumentTypeError, "stated", "{}"),
    "a certain statement": (
        lambda: statements(BASE, {EVENT: 1.0}),
        ArgumentError,
        "stated",
        "1.0",
    ),
    "no draw on one side": (
        lambda: statements(BASE, {"mu < 5": 0.5}),
        QuantityError,
        "stated",
        "none outside",
    ),
    "contradicting statements": (
        lambda: statements(BASE, {"mu < 0.1": 0.5, "mu < 0.11": 0.4}),
        ArgumentError,
        "stated",
        "P(mu < 0.11) = 0.4",
    ),
    "statements about many": (
        lambda: statements(BASE, {"rate > 0.1": 0.5}),
        QuantityError,
        "stated",
        "(4,)",
    ),
    "no priors": (lambda: prior_factors(BASE, {}), ArgumentTypeError, "priors", "{}"),
    "against nothing": (
        lambda: prior_factors(BASE, {"a": _scale(0.1)}, "b"),
        UnknownNameError,
        "against",
        "'b'",
    ),
    "contrary per observation": (
        lambda: least_data(BASE, EVENT, 0.5, "rate"),
        QuantityError,
        "contrary",
        "(4,)",
    ),
    "most below one": (
        lambda: least_data(BASE, EVENT, 0.5, "mu", most=0.5),
        ArgumentError,
        "most",
        "0.5",
    ),
    "most as text": (
        lambda: least_data(BASE, EVENT, 0.5, "mu", most="9"),
        ArgumentTypeError,
        "most",
        "'9'",
    ),
}


@pytest.mark.parametrize("name", REFUSED)
def test_it_is_refused_tellingly(name: str) -> None:
    act, error, argument, came = REFUSED[name]
    with pytest.raises(SteelyardError) as caught:
        act()
    told = caught.value
    assert type(told) is error, f"{type(told).__name__}: {told}"
    assert argument in told.argument
    assert came in f"{told.expected} | {told.came}"
    assert told.next_step.strip().endswith((".", "?"))
    assert len(str(told)) < 800


def test_predictive_draws_under_another_model_are_refused_at_the_node() -> None:
    rng = np.random.default_rng(1)
    x = rng.normal(size=(2, 200))
    fit = sy.Fit(
        {"x": x, "again": x + rng.normal(size=(2, 200))},
        {"x": sy.Normal(0, 2)},
        {"A": -0.5 * x[..., None] ** 2},
        predictive={"again": "A"},
    )

    def other(factor: float) -> Any:
        return sy.swap_loglik({"A": -0.5 * factor * x[..., None] ** 2})

    for asked in ("again", "again > 0"):
        with pytest.raises(QuantityError, match="again"):
            sweep(fit._record, other, [0.9, 1.1], asked)
    with pytest.raises(QuantityError, match="again"):
        tipping_point(fit._record, other, "again > 0", 0.5, (0.9, 1.1))
    assert sweep(fit._record, other, [0.9, 1.1], "x").trusted.all()
