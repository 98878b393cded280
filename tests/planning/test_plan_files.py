"""Plans in TOML: read as meant, refused with the line and the nearest valid name."""

from __future__ import annotations

from pathlib import Path

import pytest

import steelyard as sy
from steelyard.errors import ArgumentTypeError, SteelyardError, UnknownNameError
from steelyard.planning import read_plan

TEXT = """steelyard_plan = 1
title = "quay 4"
quantities = ["mu"]

[decision]
event = "mu > 0.1"
level = 0.7

[prior]
tau = { HalfNormal = { scale = 0.05 } }
rate = { Normal = { mean = "mu", sd = "tau" } }

[[scenario]]
name = "wider spread"  # the reviewer's
swap_prior = { tau = { StudentT = { df = 4, location = 0, scale = 0.05 } } }

[[scenario]]
name = "weaker"
power = { likelihood = 0.7 }
drop = ["gauge B"]

[[scenario]]
name = "noisier"
raise_noise = { term = "gauge A", factor = 1.2, sd = "sd_a" }
later = true
"""


def test_a_plan_is_read_as_meant() -> None:
    found = read_plan(TEXT)
    assert found.prior == {"tau": sy.HalfNormal(0.05), "rate": sy.Normal("mu", "tau")}
    plan = found.plan
    assert [s.name for s in plan.scenarios] == ["wider spread", "weaker", "noisier"]
    assert [s.later for s in plan.scenarios] == [False, False, True]
    assert (plan.title, plan.event, plan.level) == ("quay 4", "mu > 0.1", 0.7)
    assert str(plan.scenarios[0].change) == "prior of tau becomes StudentT(4, 0, 0.05)"
    assert str(plan.scenarios[2].change) == "noise of gauge A times 1.2"
    texts = {str(e) for e in plan.scenarios[1].change.edits}
    assert texts == {"likelihood to the power 0.7", "without gauge B"}


def test_a_path_is_read_too(tmp_path: Path) -> None:
    path = tmp_path / "plan.toml"
    path.write_text(TEXT, encoding="utf-8")
    assert read_plan(path).plan.hash == read_plan(str(path)).plan.hash == read_plan(TEXT).plan.hash


def test_a_locked_file_holds_its_hash() -> None:
    digest = read_plan(TEXT).plan.hash
    locked = TEXT.replace("title", f'locked = "{digest}"\ntitle')
    assert read_plan(locked).plan.locked == digest
    with pytest.raises(SteelyardError, match="plan, line 2: locked") as caught:
        read_plan(locked.replace("0.7", "0.8"))
    assert digest in caught.value.came
    assert isinstance(caught.value, ValueError)


@pytest.mark.parametrize(
    ("old", "new", "line", "told"),
    [
        ("StudentT", "StudnetT", 15, "'StudentT'"),
        ("df = 4", "dof = 4", 15, "'df'"),
        ("df = 4, ", "", 15, "df"),
        ("scale = 0.05 } } }", "scale = -1.0 } } }", 15, "StudentT: scale"),
        ("power =", "pwoer =", 19, "'power'"),
        ("likelihood = 0.7", "liklihood = 0.7", 19, "'likelihood'"),
        ("likelihood = 0.7", "likelihood = -0.7", 19, "not negative"),
        ("level = 0.7", "levle = 0.7", 7, "'level'"),
        ("title", "titel", 2, "'title'"),
        ("plan = 1", "plan = 7", 1, "7"),
        ('["gauge B"]', "[2]", 20, "[2]"),
        ("factor = 1.2, ", "", 24, "factor"),
        ("later = true", 'later = "yes"', 25, "'yes'"),
        ('name = "weaker"', 'name = ""', 18, "name"),
        ("HalfNormal = {", "HalfNormla = {", 10, "'HalfNormal'"),
    ],
)
def test_what_is_wrong_is_told_with_its_line(old: str, new: str, line: int, told: str) -> None:
    with pytest.raises(SteelyardError) as caught:
        read_plan(TEXT.replace(old, new))
    error = caught.value
    assert error.argument.startswith(f"plan, line {line}:"), str(error)
    assert told in str(error)


def test_what_is_no_toml_and_what_has_no_scenario_is_refused() -> None:
    with pytest.raises(SteelyardError, match="line 2"):
        read_plan("steelyard_plan = 1\nb = = 2\n")
    with pytest.raises(SteelyardError, match=r"\[\[scenario\]\]"):
        read_plan("steelyard_plan = 1\n")
    with pytest.raises(SteelyardError, match="swap_prior"):
        read_plan('steelyard_plan = 1\n[[scenario]]\nname = "a"\n')
    with pytest.raises(ArgumentTypeError, match="a table"):
        read_plan('steelyard_plan = 1\ndecision = 3\n[[scenario]]\nname = "a"\ndrop = "b"\n')
    with pytest.raises(UnknownNameError, match="line 4"):
        read_plan('steelyard_plan = 1\n[[scenario]]\nname = "a"\ndorp = "b"\n')


STATED = """steelyard_plan = 1
[prior]
tau = { HalfNormal = { scale = 0.05 } }
"mu,nu" = { MultivariateNormal = { mean = [0, 0], covariance = [[1, 0], [0, 1]] } }
[[scenario]]
name = "a"
swap_prior = { tau = { HalfNormal = { scale = 0.1 } } }
power = { prior = { "mu, nu" = 0.5 } }
"""


@pytest.mark.parametrize(
    ("old", "new", "line"),
    [("swap_prior = { tau", "swap_prior = { tua", 7), ('"mu, nu" = 0.5', "tua = 0.5", 8)],
)
def test_a_term_that_the_files_own_prior_lacks_is_told_with_its_line(
    old: str, new: str, line: int
) -> None:
    assert len(read_plan(STATED).plan.scenarios) == 1
    with pytest.raises(UnknownNameError, match=f"plan, line {line}: tua.*'tau'"):
        read_plan(STATED.replace(old, new))
