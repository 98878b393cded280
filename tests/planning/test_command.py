"""A plan file answered from files of draws."""

from __future__ import annotations

from pathlib import Path
from typing import Any

import numpy as np
import pytest

import steelyard as sy
from steelyard.errors import ArgumentError
from steelyard.planning import answer_plan, triage

PLAN = """steelyard_plan = 1
quantities = ["mu"]

[prior]
"mu, tau" = { Normal = { mean = 0, sd = 1 } }

[[scenario]]
name = "narrower"
swap_prior = { "mu, tau" = { Normal = { mean = 0, sd = 0.9 } } }

[[scenario]]
name = "less data"
power = { likelihood = 0.9 }
"""


@pytest.fixture
def files(tmp_path: Path) -> dict[str, Any]:
    rng = np.random.default_rng(9)
    mu, tau = rng.normal(0, 0.3, size=(2, 4, 300))
    loglik = -0.5 * (mu[..., None] - rng.normal(size=5)) ** 2
    np.savez(tmp_path / "draws.npz", mu=mu, tau=tau)
    np.save(tmp_path / "loglik.npy", loglik)
    (tmp_path / "plan.toml").write_text(PLAN, encoding="utf-8")
    return {"folder": tmp_path, "draws": {"mu": mu, "tau": tau}, "loglik": loglik}


def test_files_give_what_python_gives(files: dict[str, Any]) -> None:
    folder = files["folder"]
    found = answer_plan(folder / "plan.toml", folder / "draws.npz", folder / "loglik.npy")
    fit = sy.Fit(files["draws"], {("mu", "tau"): sy.Normal(0, 1)}, files["loglik"])
    direct = triage(fit._record, found.plan)
    assert found.table().to_csv() == direct.table().to_csv()
    assert found.failed == {}


def test_without_a_likelihood_its_rows_fail_and_stay(files: dict[str, Any]) -> None:
    folder = files["folder"]
    found = answer_plan(str(folder / "plan.toml"), str(folder / "draws.npz"))
    assert list(found.failed) == ["less data"]
    assert found.table()["scenario"] == ("narrower", "less data")


def test_a_plan_that_is_not_there_is_told(files: dict[str, Any]) -> None:
    with pytest.raises(ArgumentError, match="no file at"):
        answer_plan(files["folder"] / "paln.toml", files["folder"] / "draws.npz")
