"""Refits planned from base draws, against refits that were really made (conjugate, hence exact)."""

from __future__ import annotations

import numpy as np
import pytest

import steelyard as sy
from steelyard.planning import RefitPlan
from steelyard.planning.shares import best_shares, costs_of

SEED = 20_261_208
READING = 1.0
# Prior mean and sd of each scenario; the base has N(0, 1).
SCENARIOS = {
    "tight": (0.0, 0.5),
    "tighter": (0.0, 0.35),
    "high": (1.5, 0.6),
    "higher": (1.7, 0.5),
    "low": (-0.7, 0.5),
}
GRID = np.linspace(-8.0, 9.0, 20_001)


def posterior(mean: float, sd: float) -> tuple[float, float]:
    precision = 1 + 1 / sd**2
    return (READING + mean / sd**2) / precision, precision**-0.5


def density(name: str) -> np.ndarray:
    mean, sd = posterior(*SCENARIOS.get(name, (0.0, 1.0)))
    return np.exp(-0.5 * ((GRID - mean) / sd) ** 2) / sd / np.sqrt(2 * np.pi)


def fitted(rng: np.random.Generator, name: str, draws: int) -> sy.Fit:
    prior = SCENARIOS.get(name, (0.0, 1.0))
    mean, sd = posterior(*prior)
    mu = mean + sd * rng.normal(size=draws)
    return sy.Fit({"mu": mu}, {"mu": sy.Normal(*prior)}, ordered=False)


def changes(names: tuple[str, ...] = tuple(SCENARIOS)) -> dict[str, sy.Change]:
    return {name: sy.swap_prior(mu=sy.Normal(*SCENARIOS[name])) for name in names}


@pytest.fixture(scope="module")
def plan() -> RefitPlan:
    fit = fitted(np.random.default_rng(SEED), "base", 8000)
    return fit.plan_refits(changes(), efficiency=0.45)


def exact(plan: RefitPlan) -> np.ndarray:
    mixture = sum(share * density(name) for name, share in plan.shares.items())
    step = GRID[1] - GRID[0]
    return np.array([1 / ((density(name) ** 2 / mixture).sum() * step) for name in plan.names])


def test_few_refits_are_asked_for_and_all_scenarios_reached(plan: RefitPlan) -> None:
    assert 1 <= len(plan.refits) <= 3
    assert plan.reached.all()
    assert sum(plan.shares.values()) == pytest.approx(1, abs=1e-12)
    assert plan.cost == len(plan.refits)
    assert plan.from_base.value.min() < 0.45


def test_predicted_efficiency_is_the_exact_one(plan: RefitPlan) -> None:
    """Within 4 of its own errors: five figures, fails once in 3,000."""
    off = np.abs(plan.efficiency.value - exact(plan)) / plan.efficiency.error
    assert off.max() < 4, off
    mixture = density("base")
    step = GRID[1] - GRID[0]
    alone = [1 / ((density(n) ** 2 / mixture).sum() * step) for n in plan.names]
    off = np.abs(plan.from_base.value - alone) / plan.from_base.error
    assert off.max() < 4, off


def test_refits_that_were_made_have_the_efficiency_predicted(plan: RefitPlan) -> None:
    """Pooled at the shares of the plan: 0.03 is four times the noise of an effective size here."""
    rng = np.random.default_rng(SEED + 1)
    total = 12_000
    fits = {n: fitted(rng, n, round(total * share)) for n, share in plan.shares.items()}
    pool = sy.pool(fits, data="same", common="likelihood")
    for place, name in enumerate(plan.names):
        answer = pool.reweigh(changes()[name])
        achieved = answer.effective_size / pool.draws.size
        assert achieved == pytest.approx(plan.efficiency.value[place], abs=0.03)
        assert achieved >= 0.45 - 0.03
        assert answer.verdict.is_sound
        mean = answer.mean("mu")
        assert abs(mean.value - posterior(*SCENARIOS[name])[0]) < 4 * mean.error


def test_no_refit_where_the_base_is_enough() -> None:
    fit = fitted(np.random.default_rng(SEED), "base", 4000)
    found = fit.plan_refits(changes(("tight",)), efficiency=0.5)
    assert found.refits == ()
    assert dict(found.shares) == {"base": 1.0}
    assert "No refit" in found.advice


def test_a_scenario_out_of_reach_is_refitted_itself_and_counted_on_for_no_other() -> None:
    fit = fitted(np.random.default_rng(SEED), "base", 4000)
    far = {"far": sy.swap_prior(mu=sy.Normal(30, 0.5)), **changes(("tight",))}
    found = fit.plan_refits(far, efficiency=0.4)
    assert found.out_of_reach == ("far",)
    assert "far" in found.refits
    assert found.efficiency.value[0] == pytest.approx(found.shares["far"])
    assert found.efficiency.verdict[0].is_sound
    assert found.from_base.verdict[0].level == "refit"
    assert "out of reach" in str(found)
    assert found.broadest == "far"
    # One that is broader than the base shows more than one that is only far.
    wide = {**far, "wide": sy.swap_prior(mu=sy.Normal(0, 1.5))}
    assert fit.plan_refits(wide, efficiency=0.4).broadest == "wide"


def test_a_support_gap_is_out_of_reach_though_no_weight_shows_it() -> None:
    rng = np.random.default_rng(SEED)
    fit = sy.Fit({"x": np.abs(rng.normal(size=4000))}, {"x": sy.HalfNormal(1.0)}, ordered=False)
    found = fit.plan_refits({"both sides": sy.swap_prior(x=sy.Normal(0, 1))}, efficiency=0.3)
    assert found.out_of_reach == ("both sides",)


def test_the_broadest_base_is_named() -> None:
    """From the sd of the widest prior all are reached, not from the reported one."""
    rng = np.random.default_rng(SEED)
    fit = fitted(rng, "base", 8000)
    wide = {f"sd {sd:g}": sy.swap_prior(mu=sy.Normal(0, sd)) for sd in (0.5, 0.8, 1.3)}
    found = fit.plan_refits(wide, efficiency=0.9)
    between = found.between
    assert found.broadest in ("base", "sd 1.3")
    row = 0 if found.broadest == "base" else 1 + found.names.index(found.broadest)
    assert between.min(axis=1).argmax() == row
    assert found.broadest in found.advice


def test_a_pool_plans_from_all_of_its_draws() -> None:
    """From a pool that holds the refits of a plan, none is asked for any more."""
    rng = np.random.default_rng(SEED)
    names = ("tighter", "higher")
    first = fitted(rng, "base", 4000).plan_refits(changes(names), efficiency=0.3)
    assert first.refits
    held = [fitted(rng, name, round(8000 * share)) for name, share in first.shares.items()]
    pool = sy.pool(held, data="same", common="likelihood")
    again = pool.plan_refits(changes(names), efficiency=0.28)
    assert again.refits == ()
    assert again.from_base.value == pytest.approx(first.efficiency.value, abs=0.03)


def test_prices_steer_the_choice() -> None:
    fit = fitted(np.random.default_rng(SEED), "base", 8000)
    names = ("high", "higher")
    free = fit.plan_refits(changes(names), efficiency=0.4)
    assert len(free.refits) == 1
    dear = fit.plan_refits(changes(names), efficiency=0.4, cost={free.refits[0]: 50.0})
    assert dear.refits != free.refits
    assert dear.cost == 1.0


def test_what_cannot_be_reached_from_one_pool_is_said() -> None:
    fit = fitted(np.random.default_rng(SEED), "base", 4000)
    found = fit.plan_refits(changes(), efficiency=0.99)
    assert not found.reached.all()
    assert "do not reach it from one pool" in str(found)


def test_shares_solve_the_convex_problem() -> None:
    """Two disjoint scenarios need halves; against a fine grid for two that overlap."""
    eye = np.eye(2)
    shares, costs = best_shares(eye**2, eye)
    assert np.allclose(shares, 0.5, atol=1e-6)
    assert np.allclose(costs, 2, atol=1e-5)
    weights = np.stack([density("tight"), density("high")], axis=1)
    weights /= weights.sum(axis=0)
    squares = np.stack([density(n) for n in ("tighter", "higher")], axis=1)
    squares = (squares / squares.sum(axis=0)) ** 2
    _, found = best_shares(squares, weights)
    grid = [costs_of(squares, weights, np.array([s, 1 - s])).max() for s in np.linspace(0, 1, 2001)]
    assert found.max() == pytest.approx(min(grid), rel=2e-3)


def test_a_plan_prints_tabulates_and_plots(plan: RefitPlan) -> None:
    assert len(plan.table()) == 5
    assert "<table>" in plan._repr_html_()
    assert repr(plan).startswith("<RefitPlan: ")
    assert plan.verdict.level in ("strained", "sound")
    pytest.importorskip("matplotlib").use("Agg")
    assert len(plan.plot().get_yticklabels()) == 5


@pytest.mark.parametrize(
    ("given", "error", "told"),
    [
        ({"scenarios": {}}, sy.errors.ArgumentError, "at least one"),
        ({"scenarios": "tight"}, sy.errors.ArgumentTypeError, "{name: change}"),
        ({"scenarios": {"base": sy.power(prior=0.9)}}, sy.errors.ArgumentError, "base"),
        ({"efficiency": 0}, sy.errors.ArgumentError, "between 0 and 1"),
        ({"efficiency": 1.0}, sy.errors.ArgumentError, "between 0 and 1"),
        ({"efficiency": "half"}, sy.errors.ArgumentTypeError, "a number"),
        ({"cost": -1}, sy.errors.ArgumentError, "positive"),
        ({"cost": {"tight": 0}}, sy.errors.ArgumentError, "positive"),
        ({"cost": {"tigth": 1}}, sy.errors.UnknownNameError, "tight"),
        ({"cost": "cheap"}, sy.errors.ArgumentTypeError, "number"),
    ],
)
def test_bad_input_is_told(given: dict[str, object], error: type[Exception], told: str) -> None:
    fit = fitted(np.random.default_rng(SEED), "base", 500)
    asked: dict[str, object] = {"scenarios": changes(("tight",)), **given}
    with pytest.raises(error, match=told):
        fit.plan_refits(**asked)  # type: ignore[arg-type]
