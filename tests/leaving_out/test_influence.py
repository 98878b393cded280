"""What leaving out does to quantities: against plain twins, exact refits, and decisions flipped."""

from __future__ import annotations

import functools
from typing import Any

import numpy as np
import pytest

import steelyard as sy
from steelyard.leaving_out import LeaveOut, leave_out

from . import cases
from .models import Array, Regression, regression_loglik

SEED = 63
DRAWS = 20_000


@functools.cache
def _regression(identifier: str) -> tuple[LeaveOut, dict[str, Array], Array]:
    """Stack loss (P2.1) or stopping distances (P11.3) under the reference prior, exact draws."""
    X, y = cases.data(identifier, "X"), cases.data(identifier, "y")
    draws = Regression.reference_prior(X, y).draws(np.random.default_rng([SEED, len(y)]), DRAWS)
    loglik = regression_loglik(draws, X, y)
    fit = sy.Fit(draws, loglik=loglik, ordered=False)
    return leave_out(fit._record, quantities=["beta", "variance"]), draws, loglik


REGRESSIONS = ["P2.1", "P11.3"]


@pytest.mark.parametrize("identifier", REGRESSIONS)
def test_deletion_agrees_with_an_actual_refit_without_the_row(identifier: str) -> None:
    """Coefficients and score of every row against draws of the posterior without it.

    Four errors of both sets of draws: false alarm 6.3e-5 a comparison, about 290 comparisons.
    """
    left, draws, _ = _regression(identifier)
    X, y = cases.data(identifier, "X"), cases.data(identifier, "y")
    shift = left.influence("beta")
    sd = draws["beta"].std(axis=0)
    for row in range(len(y)):
        rest = np.delete(np.arange(len(y)), row)
        refit = Regression.reference_prior(X[rest], y[rest])
        fresh = refit.draws(np.random.default_rng([SEED, 9, row]), DRAWS)
        moved = (fresh["beta"].mean(axis=0) - draws["beta"].mean(axis=0)) / sd
        noise = fresh["beta"].std(axis=0) / sd / np.sqrt(DRAWS)
        error = np.hypot(shift.error[row], noise)
        if not bool(np.all(shift.verdict[row].is_sound)):
            assert row == 20, "only row 21 of the stack loss data may be doubted"
            continue
        # The base sd is an estimate as well: half a percent of the shift.
        assert np.all(np.abs(shift.value[row] - moved) <= 4 * error + 0.02 * np.abs(moved))
        density = np.exp(regression_loglik(fresh, X[row : row + 1], y[row : row + 1])[:, 0])
        noise = density.std() / density.mean() / np.sqrt(DRAWS)
        gap = left.by_group.value[row] - np.log(density.mean())
        assert abs(gap) <= 4 * np.hypot(left.by_group.error[row], noise)


@pytest.mark.parametrize("identifier", REGRESSIONS)
def test_influence_is_the_weighted_mean_minus_the_mean_in_base_sd(identifier: str) -> None:
    left, draws, loglik = _regression(identifier)
    found = left.influence(["beta", "variance"])
    columns = np.column_stack([draws["beta"], draws["variance"]])
    for row in range(0, loglik.shape[1], 5):
        log_weights, _ = sy.weights.smooth(-loglik[:, row])
        w = np.exp(log_weights)
        plain = (w @ columns - columns.mean(axis=0)) / columns.std(axis=0)
        np.testing.assert_allclose(found.value[row], plain, rtol=1e-8, atol=1e-10)
    labels = found.labels["quantity"].tolist()
    assert labels[0] == "beta[0]"
    assert labels[-1] == "variance"


def test_the_same_pass_and_a_later_one_give_the_same_figures() -> None:
    left, _, _ = _regression("P2.1")
    later = leave_out(left._base).influence("beta")
    np.testing.assert_array_equal(left.influence("beta").value, later.value)
    np.testing.assert_array_equal(left.influence("beta").error, later.error)


def test_errors_of_influence_are_those_of_the_pair() -> None:
    """Over 200 sets of draws the spread of an influence is its mean error to a fifth.

    A standard deviation of 200 values is known to 5 %: four of those.
    """
    X, y = cases.data("P11.3", "X"), cases.data("P11.3", "y")
    posterior = Regression.reference_prior(X, y)
    value, error = [], []
    for seed in range(200):
        draws = posterior.draws(np.random.default_rng([SEED, 8, seed]), 500)
        fit = sy.Fit(draws, loglik=regression_loglik(draws, X, y), ordered=False)
        found = leave_out(fit._record, [[3], [22]]).influence("beta")
        value.append(found.value)
        error.append(found.error)
    ratio = np.mean(error, axis=0) / np.std(value, axis=0)
    assert np.all((ratio > 0.8) & (ratio < 1.25))


def test_the_few_that_matter_come_sorted_with_their_verdicts() -> None:
    left, _, _ = _regression("P2.1")
    table = left.influential("beta[1]", 5)
    assert len(table) == 5
    size = np.abs(table["influence"])
    assert np.all(np.diff(size) <= 0)
    assert table["group"][0] == "20"
    whole = left.influence("beta[1]").value[:, 0]
    assert size[0] == np.abs(whole).max()


def test_an_event_counts_as_its_probability() -> None:
    left, draws, _ = _regression("P2.1")
    found = left.influence("beta[3] > 0")
    inside = draws["beta"][:, 3] > 0
    p = inside.mean()
    without = sy.Fit(draws, loglik=left._base.loglik["likelihood"].source, ordered=False)
    exact = without.reweigh(sy.drop([4])).prob("beta[3] > 0").value
    assert found.value[4, 0] * np.sqrt(p * (1 - p)) == pytest.approx(exact - p, abs=1e-9)


def test_a_quantity_that_does_not_vary_has_no_influence_figure() -> None:
    left, _, _ = _regression("P2.1")
    found = left.influence(np.ones(DRAWS))
    assert np.isnan(found.value).all()


def _straight(slope: float, count: int = 30) -> tuple[Any, Array]:
    rng = np.random.default_rng(SEED)
    x = np.linspace(-1, 1, count)
    y = slope * x + 0.5 * rng.normal(size=count)
    mean, sd = (x @ y) / (x @ x), 0.5 / np.sqrt(x @ x)
    draws = {"slope": mean + sd * np.random.default_rng(SEED + 1).normal(size=DRAWS)}
    loglik = -0.5 * ((y - draws["slope"][:, None] * x) / 0.5) ** 2
    return sy.Fit(draws, loglik=loglik, ordered=False)._record, np.stack([x, y])


def test_a_set_that_flips_a_decision_flips_it_in_closed_form_and_none_can_be_spared() -> None:
    record, (x, y) = _straight(0.4)
    left = leave_out(record)
    flip = left.fewest_to_flip("slope > 0", 0.95)
    assert flip.status == "flips"
    assert flip.before.decision.above
    assert not flip.after.decision.above

    def exact(out: list[int]) -> float:
        from scipy import stats

        rest = np.delete(np.arange(len(x)), out)
        spread = x[rest] @ x[rest]
        return float(stats.norm.cdf((x[rest] @ y[rest]) / spread * np.sqrt(spread) / 0.5))

    out = list(flip.positions)
    assert exact([]) > 0.95
    assert abs(exact(out) - flip.after.value) <= 4 * flip.after.error
    for spared in out:
        assert exact([o for o in out if o != spared]) > 0.95 - 4 * float(flip.after.error)
    assert "flips without" in str(flip)


def test_a_decision_that_few_deletions_do_not_flip_holds() -> None:
    record, _ = _straight(1.0)
    flip = leave_out(record).fewest_to_flip("slope > 0.7", 0.5, most=2)
    assert flip.status == "holds"
    assert len(flip.groups) == 2


def test_weights_that_fail_before_the_flip_are_said_to() -> None:
    record, _ = _straight(1.0)
    left = leave_out(record)
    flip = left.fewest_to_flip("slope > 0.6", 0.3, most=29)
    assert flip.status == "unknown"
    assert flip.after.verdict.level == "refit"
    without_draws = left.fewest_to_flip("slope > -3", 0.5)
    assert without_draws.status == "unknown"
    assert without_draws.groups == ()
    assert "too few draws" in str(without_draws)
