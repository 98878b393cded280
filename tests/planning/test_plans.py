"""Plans: one hash for one meaning, additions marked, nothing altered unseen; and the table."""

from __future__ import annotations

import csv
import io
import math
import pickle
from collections.abc import Callable
from typing import Any

import numpy as np
import pytest

import steelyard as sy
from steelyard.errors import (
    ArgumentError,
    ArgumentTypeError,
    ChangeError,
    QuantityError,
    SteelyardError,
    UnknownNameError,
)
from steelyard.planning import Plan, Scenario, read_plan, triage

EVENT = "mu > 0.1"
WIDER = sy.swap_prior(tau=sy.HalfNormal(0.1))
SCENARIOS = {
    "wider": WIDER,
    "mean": sy.swap_prior(mu=sy.Normal(0.08, 0.05)) & sy.power(likelihood=0.9),
    "half": sy.weigh_data({"A": 0.5}),
}


@pytest.fixture(scope="module")
def fit() -> Any:
    rng = np.random.default_rng(20_261_203)
    mu = rng.normal(0.10, 0.01, size=(4, 250))
    tau = np.abs(rng.normal(0.02, 0.006, size=(4, 250))) + 0.002
    loglik = -0.5 * ((np.array([0.08, 0.13, 0.10]) - mu[..., None]) / 0.03) ** 2
    prior = {"mu": sy.Normal(0.1, 0.1), "tau": sy.HalfNormal(0.05)}
    return sy.Fit({"mu": mu, "tau": tau}, prior, {"A": loglik})


def _plan(**changes: Any) -> Plan:
    return Plan(
        **{"scenarios": SCENARIOS, "quantities": "mu", "event": EVENT, "level": 0.6, **changes}
    )


def test_a_plan_that_means_the_same_has_the_same_hash() -> None:
    swapped = {
        **SCENARIOS,
        "mean": sy.power(likelihood=0.9) & sy.swap_prior(mu=sy.Normal(0.08, 0.05)),
    }
    whole = {**SCENARIOS, "wider": sy.swap_prior({"tau": sy.HalfNormal(np.float64(0.1))})}
    assert _plan(scenarios=swapped).hash == _plan(scenarios=whole).hash == _plan().hash
    assert _plan(title="another title").hash == _plan().hash


@pytest.mark.parametrize(
    "other",
    [
        {"level": 0.7},
        {"quantities": "tau"},
        {"event": "mu > 0.11"},
        {"scenarios": {**SCENARIOS, "wider": sy.swap_prior(tau=sy.HalfNormal(0.1000001))}},
        {"scenarios": {**SCENARIOS, "one more": WIDER}},
        {"scenarios": dict(reversed(SCENARIOS.items()))},
        {"scenarios": {**SCENARIOS, "half": sy.log_ratio(np.zeros(1000))}},
    ],
)
def test_a_plan_that_means_something_else_has_another_hash(other: dict[str, Any]) -> None:
    assert _plan(**other).hash != _plan().hash


def test_callables_are_told_apart_by_what_they_do() -> None:
    def plan(ratio: Any) -> str:
        return Plan({"a": sy.log_ratio(ratio)}).hash

    def same(draws: Any) -> Any:
        return draws["mu"] * 2.0

    twice = [plan(lambda d: d["mu"]), plan(lambda d: -d["mu"]), plan(lambda d: d["tau"])]
    assert len(set(twice)) == 3
    assert plan(same) == plan(same)


def test_additions_after_the_lock_are_marked_and_leave_the_hash_alone() -> None:
    plan = _plan().lock()
    longer = plan.adding("afterthought", WIDER)
    assert [s.later for s in longer.scenarios] == [False, False, False, True]
    assert longer.hash == plan.hash == longer.locked
    assert "(added later)" in str(longer)
    assert not _plan().adding("in time", WIDER).scenarios[-1].later


def test_an_altered_plan_cannot_pass_for_the_locked_one() -> None:
    locked = _plan().lock()
    with pytest.raises(ChangeError, match="changed after it was locked"):
        _plan(level=0.7, locked=locked.locked)
    with pytest.raises(ChangeError, match="mark additions as later"):
        _plan(scenarios=(*locked.scenarios, Scenario("slipped in", WIDER)), locked=locked.locked)


def test_every_scenario_has_a_row_also_those_that_fail(fit: Any) -> None:
    plan = _plan(
        scenarios={
            **SCENARIOS,
            "no such term": sy.swap_prior(nu=sy.Normal(0, 1)),
            "nowhere": sy.swap_prior(mu=sy.Flat(5, 6)),
        }
    )
    found = triage(fit._record, plan)
    table = found.table()
    assert list(dict.fromkeys(table["scenario"])) == [s.name for s in plan.scenarios]
    failed = {row["scenario"]: row for row in table if row["level"] == "failed"}
    assert set(failed) == set(found.failed) == {"no such term", "nowhere"}
    assert "'nu'" in failed["no such term"]["reasons"]
    assert math.isnan(failed["nowhere"]["value"])
    assert "no such term" in str(found)


def test_rows_are_the_answers_of_reweigh(fit: Any) -> None:
    found = triage(fit._record, _plan())
    for place, change in enumerate(SCENARIOS.values()):
        answer = fit.reweigh(change)
        pairs = [
            (found.value["mu"], answer.mean("mu")),
            (found.value[EVENT], answer.prob(EVENT)),
            (found.shift["mu"], answer.shift("mu")),
            (found.shift[EVENT], answer.shift(EVENT)),
        ]
        for many, one in pairs:
            # Another order of summation.
            assert many.value[place] == pytest.approx(one.value, rel=1e-9, abs=1e-13)
            assert many.error[place] == pytest.approx(one.error, rel=1e-6)
            assert str(many.verdict.level[place]) == str(one.verdict.level)


def test_rows_of_weighted_draws_are_the_answers_of_reweigh() -> None:
    x = np.random.default_rng(12).normal(size=(2, 400))
    fit = sy.Fit({"x": x}, {"x": sy.Normal(0, 2)}, log_weights=-0.2 * x**2 + 0.3 * x)
    change = sy.swap_prior(x=sy.Normal(0.5, 1.5)) & sy.log_ratio(0.1 * np.sin(x))
    found, answer = triage(fit._record, {"moved": change}, "x"), fit.reweigh(change)
    for many, one in ((found.value["x"], answer.mean("x")), (found.shift["x"], answer.shift("x"))):
        assert many.value[0] == pytest.approx(one.value, rel=1e-9)
        assert many.error[0] == pytest.approx(one.error, rel=1e-6)
        assert {r.code for r in many.verdict[0].reasons} == {r.code for r in one.verdict.reasons}


def test_two_runs_give_the_same_bytes(fit: Any) -> None:
    plan = _plan().lock().adding("later", WIDER & sy.drop("A"))
    one, other = (triage(fit._record, plan).table().to_csv() for _ in range(2))
    assert one == other
    with sy.threads(1):
        assert triage(fit._record, plan).table().to_csv() == one
    rows = list(csv.DictReader(io.StringIO(one)))
    assert [row["planned"] for row in rows[::2]] == ["yes", "yes", "yes", "later"]


def test_bands_are_wider_than_single_intervals_and_sides_are_told(fit: Any) -> None:
    found = triage(fit._record, _plan())
    assert 1.96 < found.critical < 3.5
    for row in found.table():
        half = found.critical * row["shift_error"]
        assert row["high"] - row["low"] == pytest.approx(2 * half)
        if row["quantity"] == EVENT:
            assert row["side"] == ("above" if row["value"] > 0.6 else "not above")
            answer = fit.reweigh(SCENARIOS[row["scenario"]])
            told = answer.prob(EVENT, level=0.6).decision.right
            assert row["right_side"] == pytest.approx(told, nan_ok=True)
        else:
            assert row["side"] == ""
            assert row["right_side"] is None


def test_a_change_that_changes_nothing_moves_nothing(fit: Any) -> None:
    found = triage(
        fit._record, {"none": sy.power(likelihood=1), "scaled": sy.log_ratio(np.ones(1000))}, "mu"
    )
    assert found.shift["mu"].value.tolist() == [0.0, 0.0]
    assert found.shift["mu"].error.tolist() == [0.0, 0.0]


def test_without_a_plan_the_same_is_asked_directly(fit: Any) -> None:
    direct = triage(fit._record, SCENARIOS, "mu", EVENT, 0.6)
    assert direct.table().to_csv() == triage(fit._record, _plan()).table().to_csv()
    assert pickle.loads(pickle.dumps(direct.names)) == direct.names
    only = triage(fit._record, SCENARIOS, event=EVENT, level=0.6)
    assert list(only.value) == [EVENT]


def test_predictive_draws_under_another_model_fail_in_their_row_only() -> None:
    x = np.random.default_rng(1).normal(size=(2, 200))
    base = sy.Fit(
        {"x": x, "again": 2 * x},
        {"x": sy.Normal(0, 2)},
        {"A": -0.5 * x[..., None] ** 2},
        predictive={"again": "A"},
    )._record
    other = sy.swap_loglik({"A": -0.45 * x[..., None] ** 2})
    found = triage(base, {"fine": sy.swap_prior(x=sy.Normal(0, 1.9)), "other": other}, ["again"])
    assert list(found.failed) == ["other"]
    assert found.names == ("fine",)


def test_no_scenario_answered_is_a_table_of_failures(fit: Any) -> None:
    found = triage(fit._record, {"a": sy.swap_prior(nu=sy.Normal(0, 1))}, "mu")
    assert [row["level"] for row in found.table()] == ["failed"]
    assert math.isnan(found.critical)


REFUSED: dict[str, tuple[Callable[[Any], Any], type[SteelyardError], str]] = {
    "one change alone": (lambda b: triage(b, WIDER), ArgumentTypeError, "scenarios"),
    "a number": (lambda b: triage(b, 3), ArgumentTypeError, "scenarios"),
    "no change": (lambda b: triage(b, {"a": None}), ArgumentTypeError, "scenarios['a']"),
    "a bare list": (lambda b: triage(b, [WIDER]), ArgumentTypeError, "scenarios[0]"),
    "a name twice": (lambda b: triage(b, [("a", WIDER), ("a", WIDER)]), ArgumentError, "scenarios"),
    "nothing": (lambda b: triage(b, {}), ArgumentError, "scenarios"),
    "event without level": (lambda b: triage(b, SCENARIOS, event=EVENT), ArgumentError, "level"),
    "level of one": (lambda b: triage(b, SCENARIOS, event=EVENT, level=1), ArgumentError, "level"),
    "asked twice": (lambda b: triage(b, _plan(), "mu"), ArgumentError, "triage"),
    "unknown quantity": (lambda b: triage(b, SCENARIOS, "nu"), UnknownNameError, "quantity"),
    "a name as event": (
        lambda b: triage(b, SCENARIOS, event="mu", level=0.5),
        QuantityError,
        "event",
    ),
}


@pytest.mark.parametrize("name", REFUSED)
def test_it_is_refused_tellingly(name: str, fit: Any) -> None:
    act, error, argument = REFUSED[name]
    with pytest.raises(SteelyardError) as caught:
        act(fit._record)
    assert type(caught.value) is error, str(caught.value)
    assert argument in caught.value.argument
    assert caught.value.next_step.strip().endswith((".", "?"))


def test_a_plan_file_states_the_same_plan_as_python() -> None:
    text = """
steelyard_plan = 1
quantities = "mu"
[decision]
event = "mu > 0.1"
level = 0.6
[[scenario]]
name = "wider"
swap_prior = { tau = { HalfNormal = { scale = 0.1 } } }
[[scenario]]
name = "mean"
power = { likelihood = 0.9 }
swap_prior = { mu = { Normal = { mean = 0.08, sd = 0.05 } } }
[[scenario]]
name = "half"
weigh_data = { A = 0.5 }
"""
    assert read_plan(text).plan.hash == _plan().hash


def test_quantiles_stand_beside_the_means(fit: Any) -> None:
    probs = (0.001, 0.05, 0.5)
    found = triage(fit._record, SCENARIOS, ["mu", "tau"], EVENT, 0.6, probs)
    for place, change in enumerate(SCENARIOS.values()):
        answer = fit.reweigh(change)
        for name in ("mu", "tau"):
            # Another order of summation.
            np.testing.assert_allclose(
                found.quantiles[name][place, 1:], answer.quantile(name, probs[1:]).value, rtol=1e-9
            )
            # A thousandth of a thousand draws is beyond them.
            assert math.isnan(found.quantiles[name][place, 0])
    assert np.isnan(found.quantiles[EVENT]).all()
    table = found.table()
    assert [n for n in table.columns if n.startswith("q0")] == ["q0.001", "q0.05", "q0.5"]
    assert "q0.5" not in triage(fit._record, SCENARIOS, "mu").table().columns


def test_quantiles_belong_to_what_was_planned() -> None:
    assert _plan(probs=(0.05, 0.95)).hash != _plan().hash
    assert _plan(probs=[0.05, 0.95]).hash == _plan(probs=np.array([0.05, 0.95])).hash
    text = 'steelyard_plan = 1\nprobs = [0.05, 1.5]\n[[scenario]]\nname = "a"\ndrop = ["A"]\n'
    with pytest.raises(SteelyardError, match="line 2"):
        read_plan(text)
    good = read_plan(text.replace("1.5", "0.95"))
    assert good.plan.probs == (0.05, 0.95)


@pytest.mark.parametrize("probs", [0.0, [0.5, 0.5], [0.9, 0.1], [], "many", [float("nan")]])
def test_probabilities_that_are_none_are_refused(probs: Any) -> None:
    with pytest.raises((ArgumentError, ArgumentTypeError), match="probs"):
        _plan(probs=probs)
