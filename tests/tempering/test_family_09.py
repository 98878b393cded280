"""Family 9: tempering against closed-form ladders, known constants and published evidence."""

from __future__ import annotations

import math
from typing import Any

import numpy as np
import pytest

import steelyard as sy
from steelyard.repair.schedule import next_temperature

from .problems import Conjugate, case, perfect, pima, value

SEED = 20_261_209
LADDERS = ["P9.1", "P9.2"]


def _conjugate(identifier: str) -> tuple[Conjugate, dict[str, Any]]:
    found = case(identifier)
    given = found["inputs"]
    problem = Conjugate(int(given["dimension"]), float(given["c"]), float(given["L"]))
    return problem, found["expected"]


@pytest.mark.parametrize("identifier", LADDERS)
def test_the_constants_of_the_cases_are_those_of_the_tests(identifier: str) -> None:
    problem, expected = _conjugate(identifier)
    assert problem.log_constant == pytest.approx(value(expected["log_evidence"]), rel=1e-12)
    mean, sd = problem.moments(1.0)
    assert mean == pytest.approx(value(expected["mean_end"]), rel=1e-12)
    assert sd == pytest.approx(value(expected["sd_end"]), rel=1e-12)


def test_the_next_temperature_is_the_one_of_the_closed_form() -> None:
    # P9.1 at evenly spaced probabilities of the exact distribution at each temperature: the sums
    # are midpoint rules of 100,000 nodes, whose tails beyond 1e-5 move a temperature by < 1e-3.
    from scipy.stats import norm

    problem, expected = _conjugate("P9.1")
    nodes = norm.ppf((np.arange(100_000) + 0.5) / 100_000)
    weights = np.full(100_000, 1e-5)
    ladder, shares = value(expected["ladder"]), value(expected["ess_fraction_per_step"])
    for before, after, share in zip(ladder[:-1], ladder[1:], shares, strict=True):
        mean, sd = problem.moments(before)
        x = (mean + sd * nodes)[:, None]
        found = next_temperature(before, weights, problem.target(x) - problem.source(x), 0.5)
        assert found[0] == pytest.approx(after, rel=1e-3)
        assert found[1] == pytest.approx(share, rel=1e-3)


@pytest.mark.parametrize("identifier", LADDERS)
@pytest.mark.parametrize("move", ["exact", "mixed"])
def test_an_adaptive_run_follows_the_closed_form_ladder(
    identifier: str, move: str, monkeypatch: pytest.MonkeyPatch
) -> None:
    # As the case advises: steps within one, temperatures within 10 % for 4,000 draws or more.
    problem, expected = _conjugate(identifier)
    perfect(problem, monkeypatch)
    run = problem.temper(size=8000, efficiency=0.5, move=move, rng=SEED)
    ladder = value(expected["ladder"])[1:]
    assert abs(len(run.history) - value(expected["n_steps"])) <= 1
    for step, temperature in zip(run.history, ladder, strict=False):
        assert step.temperature == pytest.approx(temperature, rel=0.1)


@pytest.mark.parametrize("identifier", LADDERS)
def test_perfect_moves_give_the_variance_of_the_closed_form(
    identifier: str, monkeypatch: pytest.MonkeyPatch
) -> None:
    # P13.8 and P13.9: S·Var(log Z) within 30 % for an adaptive ladder and finite S. 150 runs of
    # 1,000 particles: the variance of 150 normals is known to 11.5 %, so that 30 % is 2.6 errors
    # (false alarm 1 %); the reported one, an average over 150, is held to the same.
    problem, expected = _conjugate(identifier)
    perfect(problem, monkeypatch)
    runs = [
        problem.temper(size=1000, efficiency=0.5, move="exact", rng=SEED + i).log_constant
        for i in range(150)
    ]
    off = np.array([run.value for run in runs]) - problem.log_constant
    reported = np.array([run.error for run in runs])
    stated = value(expected["variance_log_evidence_times_N_perfect_moves"])
    assert 1000 * (off**2).mean() == pytest.approx(stated, rel=0.3)
    assert 1000 * (reported**2).mean() == pytest.approx(stated, rel=0.3)
    # |t| of 19 degrees beyond 3 has probability 0.74 %: more than 6 of 150 would be 2e-4.
    assert (np.abs(off) > 3 * reported).sum() <= 6


def _close(estimate: sy.Estimate, expected: float, errors: float = 4.0) -> None:
    """Within so many of its own errors: t of 19 degrees beyond 4 is 8e-4."""
    assert abs(estimate.value - expected) < errors * estimate.error, (str(estimate), expected)
    assert estimate.verdict.is_sound, str(estimate.verdict)


def test_the_banana_has_its_constant_and_moments() -> None:
    found = case("P9.3")
    s1, s2, b = (found["inputs"][k] for k in ("s1", "s2", "b"))
    expected = found["expected"]

    def banana(x: np.ndarray) -> np.ndarray:
        bent = x[:, 1] - b * (x[:, 0] ** 2 - s1**2)
        return -0.5 * (x[:, 0] / s1) ** 2 - 0.5 * (bent / s2) ** 2

    run = sy.temper(
        lambda n, rng: rng.normal(0, 3, size=(n, 2)),
        lambda x: -0.5 * (x**2).sum(axis=1) / 9 - math.log(2 * math.pi * 9),
        banana,
        size=10_000,
        rng=SEED,
    )
    answer = run.answer()
    # The banana reaches further up than the normal: the mean weight says so itself.
    constant = run.log_constant
    assert abs(constant.value - value(expected["log_z"])) < 4 * constant.error
    assert "step_shape" in [reason.code for reason in constant.verdict.reasons]
    _close(run.bridged_constant, value(expected["log_z"]))
    for column in (0, 1):
        name, place = f"x{column + 1}", f"x[{column}]"
        _close(answer.mean(place), value(expected[f"mean_{name}"]))
        _close(answer.sd(place), math.sqrt(value(expected[f"var_{name}"])))


def test_two_far_modes_keep_their_weights() -> None:
    found = case("P9.4")
    given, expected = found["inputs"], found["expected"]
    first = np.arange(given["d"]) == 0

    def modes(x: np.ndarray) -> np.ndarray:
        parts = [
            math.log(w) - given["d"] * math.log(s) - 0.5 * ((x - m * first) ** 2).sum(axis=1) / s**2
            for w, m, s in zip(given["w"], given["m"], given["s"], strict=True)
        ]
        return np.logaddexp(*parts)

    run = sy.temper(
        lambda n, rng: rng.normal(0, 5, size=(n, 4)),
        lambda x: -0.5 * (x**2).sum(axis=1) / 25 - 4 * math.log(5) - 2 * math.log(2 * math.pi),
        modes,
        size=10_000,
        rng=SEED,
    )
    answer = run.answer()
    _close(run.log_constant, value(expected["log_z"]))
    _close(answer.prob("x[0] > 0"), value(expected["mode_weights"])[1])
    _close(answer.mean("x[0]"), value(expected["mean_first_coordinate"]))


@pytest.mark.parametrize(("sd", "which"), [(10.0, "base"), (1.0, "new")])
def test_the_diabetes_regression_has_its_evidence_and_moments(sd: float, which: str) -> None:
    expected = case("P9.5")["expected"][which]
    prior, posterior = pima(sd)
    run = sy.temper(
        lambda n, rng: rng.normal(0, sd, size=(n, 5)), prior, posterior, size=1000, rng=SEED
    )
    constant = run.log_constant
    allowed = expected["log_evidence"]["rtol"] * abs(value(expected["log_evidence"]))
    assert abs(constant.value - value(expected["log_evidence"])) < 4 * constant.error + allowed
    # Each of ten figures within 4 errors.
    mean, spread = run.answer().mean("x"), run.answer().sd("x")
    assert (np.abs(mean.value - value(expected["mean"])) < 4 * mean.error).all()
    assert (np.abs(spread.value - value(expected["sd"])) < 4 * spread.error).all()


def test_the_diabetes_posterior_leads_to_the_one_of_the_narrower_prior() -> None:
    # From draws of the posterior under prior sd 10 (themselves tempered) to that under sd 1.
    expected = case("P9.5")["expected"]
    prior, wide = pima(10.0)
    _, narrow = pima(1.0)
    base = sy.temper(
        lambda n, rng: rng.normal(0, 10, size=(n, 5)), prior, wide, size=1000, rng=SEED
    )
    run = sy.temper(base.points, wide, narrow, start_log_weights=base.log_weights, rng=SEED)
    constant = run.log_constant
    # The densities lack 10⁵ as the ratio of the priors' constants.
    ratio = constant.value + 5 * math.log(10)
    assert abs(ratio - value(expected["log_marginal_ratio"])) < 4 * constant.error
    mean = run.answer().mean("x")
    assert (np.abs(mean.value - value(expected["new"]["mean"])) < 4 * mean.error).all()
