"""What a result prints, lists and draws; and how chains and heavy groups show in its verdict."""

from __future__ import annotations

from typing import Any

import numpy as np
import pytest

import steelyard as sy
from steelyard.leaving_out import LeaveOut, leave_out, look_ahead

from .models import Array

SEED = 68


def _left(outlier: float = 0.0, draws: int = 1000, conditional: bool = False) -> LeaveOut:
    rng = np.random.default_rng(SEED)
    y = rng.normal(size=20)
    y[7] += outlier
    mu = y.mean() + rng.normal(size=(4, draws // 4)) / np.sqrt(20)
    loglik = -0.5 * (y - mu[..., None]) ** 2 - 0.5 * np.log(2 * np.pi)
    return leave_out(sy.Fit({"mu": mu}, loglik=loglik)._record)


def test_a_result_prints_both_errors_apart() -> None:
    left = _left()
    text = str(left)
    assert "Monte Carlo" in text
    assert "sampling" in text
    assert "20 groups: 20 sound" in text
    assert "optimism" in text
    assert "<pre>" in left._repr_html_()
    assert left.sampling_error > 10 * left.log_score.error


def test_a_table_has_one_row_a_group() -> None:
    left = _left()
    table = left.table()
    assert len(table) == 20
    assert table["log_score"] == tuple(left.by_group.value)
    assert len(left.untrusted()) == 0


def test_a_sum_is_no_better_than_its_parts_and_names_what_would_cure_them() -> None:
    left = _left(outlier=25.0)
    table = left.untrusted()
    assert table["group"][0] == "7"
    assert table["level"][0] == "refit"
    assert "with_refits" in table["cure"][0]
    assert left.verdict.level == "refit"
    codes = {r.code: r for r in left.verdict.reasons}
    assert "of 20 groups left out" in codes["groups_refit"].sentence
    cured = left.with_refits({7: -300.0})
    assert cured.verdict.level != "refit"
    assert cured.by_group.verdict.level[7] == "sound"


def test_an_error_of_a_group_without_finite_mean_is_infinite() -> None:
    rng = np.random.default_rng(SEED)
    loglik = np.column_stack([3 * np.log(rng.random(4000)), 0.1 * rng.normal(size=4000)])
    left = leave_out(sy.Fit({"x": rng.normal(size=4000)}, loglik=loglik, ordered=False)._record)
    assert left.tail_shape[0] > 1
    assert np.isinf(left.by_group.error[0])
    assert np.isfinite(left.by_group.error[1])
    assert np.isinf(left.log_score.error)


def test_autocorrelated_draws_have_larger_errors() -> None:
    rng = np.random.default_rng(SEED)
    noise = rng.normal(size=(4, 1000))
    x = np.empty_like(noise)
    x[:, 0] = noise[:, 0]
    for t in range(1, 1000):
        x[:, t] = 0.9 * x[:, t - 1] + np.sqrt(1 - 0.81) * noise[:, t]
    y = np.linspace(-1, 1, 10)
    loglik = -0.5 * (y - 0.3 * x[..., None]) ** 2
    ordered = leave_out(sy.Fit({"x": x}, loglik=loglik)._record)
    shuffled = leave_out(sy.Fit({"x": x}, loglik=loglik, ordered=False)._record)
    # Autocorrelation times of 19 (linear in x) to 9.5 (square) make errors 4.4 to 3.1 times larger;
    # the time itself is estimated from 200 to 400 effective draws.
    ratio = ordered.log_score.error / shuffled.log_score.error
    assert 2 < ratio < 6


def test_a_chain_apart_is_seen_in_the_total() -> None:
    rng = np.random.default_rng(SEED)
    x = rng.normal(size=(4, 500))
    x[3] += 2
    loglik = -0.5 * (np.linspace(2, 3, 10) - 0.2 * x[..., None]) ** 2
    left = leave_out(sy.Fit({"x": x}, loglik=loglik)._record)
    assert "chains_disagree" in {r.code for r in left.verdict.reasons}


def test_a_chain_apart_is_seen_in_the_groups_that_it_weighs_upon() -> None:
    """One chain in five stands apart: readings that see it are told, one that does not is not."""
    rng = np.random.default_rng(SEED)
    x = rng.normal(size=(4, 500))
    x[3] += 1.5
    loading = np.array([0.4, 0.4, 0.0, 0.4])
    loglik = -0.5 * (1.0 - loading * x[..., None]) ** 2
    loglik[..., 2] = 0.1 * rng.normal(size=x.shape)
    verdict = leave_out(sy.Fit({"x": x}, loglik=loglik)._record).by_group.verdict
    told = ["chain_share" in {r.code for r in verdict[i].reasons} for i in range(4)]
    assert told == [True, True, False, True]


def test_chains_that_agree_are_not_told_apart_however_many_groups_there_are() -> None:
    """
    5000 groups, four chains of the same draws in another order: p-values count their number.

    Held one by one against 1e-3 about five would be told; together at most one in a thousand runs.
    """
    rng = np.random.default_rng(SEED)
    x = rng.normal(size=(4, 250))
    loglik = -0.5 * (rng.normal(size=5000) - 0.3 * rng.normal(size=(4, 250, 5000))) ** 2
    verdict = leave_out(sy.Fit({"x": x}, loglik=loglik)._record).by_group.verdict
    codes = {f.code: int((f.rank < 2).sum()) for f in verdict.findings if f.figure.ndim}
    assert codes["chain_share"] == 0


@pytest.mark.parametrize("is_callable", [False, True])
def test_the_list_of_cures_names_moment_matching_where_the_likelihood_can_be_moved(
    is_callable: bool,
) -> None:
    rng = np.random.default_rng(SEED)
    y = np.append(rng.normal(size=20), 25.0)
    mu = y.mean() + rng.normal(size=(4, 250)) / np.sqrt(21)

    def loglik(draws: Any) -> Array:
        return np.asarray(-0.5 * (y - draws["mu"][..., None]) ** 2)

    source: Any = loglik if is_callable else loglik({"mu": mu})
    fit = sy.Fit({"mu": mu}, prior={"mu": sy.Normal(0, 100)}, loglik=source)
    cure = leave_out(fit._record).untrusted()["cure"][0]
    assert ("moment matching by repair.left_out" in cure) == is_callable
    assert "with_refits" in cure


@pytest.fixture
def axes() -> Any:
    import matplotlib as mpl

    mpl.use("Agg")
    import matplotlib.pyplot as plt

    figure, ax = plt.subplots()
    yield ax
    plt.close(figure)


def test_plots_draw_on_the_given_axes_and_return_them(axes: Any) -> None:
    left = _left(outlier=4.0)
    assert left.plot(ax=axes) is axes
    assert axes.get_xlabel()


def test_the_plot_of_drivers_ends_at_the_sum_of_all_shifts(axes: Any) -> None:
    left = _left()
    assert left.plot.drivers("mu", ax=axes) is axes
    shift = left.influence("mu").value[:, 0]
    ends = sorted(float(line.get_ydata()[-1]) for line in axes.lines if len(line.get_xdata()) > 2)
    assert ends[-1] == pytest.approx(shift[shift > 0].sum())
    assert ends[0] == pytest.approx(shift[shift < 0].sum())


def test_the_plot_of_a_contrast_ends_at_the_difference(axes: Any) -> None:
    found = _left(outlier=1.0).contrast(_left())
    assert found.plot(ax=axes) is axes
    assert float(axes.lines[-1].get_ydata()[-1]) == pytest.approx(found.difference.value)


def test_calibration_and_look_ahead_can_be_drawn(axes: Any) -> None:
    left = _left()
    rng = np.random.default_rng(SEED)
    cdf: Array = rng.random((4, 250, 20))
    assert left.calibration(cdf=cdf).plot(ax=axes) is axes
    mu = rng.normal(size=1000)
    series = -0.5 * ((np.linspace(0, 3, 60) - mu[:, None]) / 0.1) ** 2
    fit = sy.Fit({"mu": mu}, loglik=series[:, :2], ordered=False)
    ahead = look_ahead(fit._record, series, from_=2)
    assert ahead.plot(ax=axes) is axes
    assert len(ahead.table()) == 58
    assert "refit" in str(ahead)


def test_effective_draws_are_those_that_would_give_the_error() -> None:
    """Independent draws of the posterior without the group: their own error of the log score."""
    rng = np.random.default_rng(SEED)
    y = rng.normal(size=20)
    mu = y.mean() + rng.normal(size=20_000) / np.sqrt(20)
    loglik = -0.5 * (y - mu[:, None]) ** 2
    left = leave_out(sy.Fit({"mu": mu}, loglik=loglik, ordered=False)._record).by_group
    fresh = y[1:].mean() + rng.normal(size=200_000) / np.sqrt(19)
    density = np.exp(-0.5 * (y[0] - fresh) ** 2)
    count = float(np.var(density) / density.mean() ** 2 / left.error[0] ** 2)
    # The spread of 200,000 densities is known to a percent, that of the error to a few.
    assert left.effective_draws[0] == pytest.approx(count, rel=0.05)
