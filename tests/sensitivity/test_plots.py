"""Plots of sweeps, tipping points, perturbed priors, plans and attributions."""

from __future__ import annotations

from collections.abc import Iterator
from typing import Any

import numpy as np
import pytest

import steelyard as sy
from steelyard.answers.attribution import attribution_of
from steelyard.answers.quantities import read_quantity
from steelyard.errors import ArgumentError, UnknownNameError
from steelyard.planning import triage
from steelyard.sensitivity import least_perturbation, sweep, tipping_point

from . import cases

BASE = cases.quays()._record
EVENT = "rate[1] > 0.12"


@pytest.fixture
def ax() -> Iterator[Any]:
    matplotlib = pytest.importorskip("matplotlib")
    matplotlib.use("Agg")
    import matplotlib.pyplot as plt

    figure, axes = plt.subplots()
    yield axes
    figure.canvas.draw()  # what cannot be rendered fails here
    plt.close(figure)


def _scale(scale: float) -> Any:
    return sy.swap_prior(tau=sy.HalfNormal(scale))


def test_a_curve_shows_the_values_where_sound(ax: Any) -> None:
    swept = sweep(BASE, _scale, np.linspace(0.005, 0.2, 12), {"p": EVENT})
    assert swept.plot(ax=ax) is ax
    drawn = [line.get_ydata() for line in ax.lines if len(line.get_ydata()) == 12]
    sound = swept.trusted
    np.testing.assert_array_equal(drawn[0], swept.value["p"])
    np.testing.assert_array_equal(np.isnan(drawn[1]), ~sound)
    assert ax.get_xlabel() == "scale"
    assert f"{sound.sum()} of 12" in ax.get_title(loc="left")


def test_a_map_is_drawn_for_two_hyperparameters(ax: Any) -> None:
    swept = sweep(
        BASE,
        lambda mean, scale: sy.swap_prior(mu=sy.Normal(mean, 0.02), tau=sy.HalfNormal(scale)),
        {"mean": np.linspace(0, 0.2, 6), "scale": np.linspace(0.01, 0.1, 5)},
        {"p": EVENT, "mu": "mu"},
    )
    swept.plot("mu", ax=ax)
    assert (ax.get_xlabel(), ax.get_ylabel()) == ("mean", "scale")
    with pytest.raises(UnknownNameError, match="p, mu"):
        swept.plot(ax=ax)
    with pytest.raises(ArgumentError, match="single number"):
        sweep(BASE, _scale, [0.05, 0.1], "rate").plot(ax=ax)


def test_a_tipping_point_is_marked_where_it_is(ax: Any) -> None:
    found = tipping_point(BASE, _scale, EVENT, 0.45, (0.005, 0.5))
    found.plot(ax=ax)
    marks = [line for line in ax.lines if line.get_marker() == "D"]
    assert [float(m.get_xdata()[0]) for m in marks] == [c.at for c in found.crossings]
    assert ax.get_xscale() == "log"


def test_the_implied_prior_is_drawn_and_the_posterior_refused(ax: Any) -> None:
    least_perturbation(BASE, EVENT, 0.45, "tau").plot(ax=ax)
    assert {text.get_text() for text in ax.texts} == {"implied", "stated"}
    with pytest.raises(ArgumentError, match="prior_of"):
        least_perturbation(BASE, EVENT, 0.45).plot(ax=ax)


def test_every_scenario_of_a_plan_has_its_line_also_a_failed_one(ax: Any) -> None:
    plan = {"wide": _scale(0.1), "none": sy.swap_prior(nu=sy.Normal(0, 1)), "tight": _scale(0.03)}
    found = triage(BASE, plan, "mu", EVENT, 0.45)
    found.plot(ax=ax)
    assert [t.get_text() for t in ax.get_yticklabels()] == list(plan)
    assert [t.get_text().strip() for t in ax.texts] == ["failed"]
    with pytest.raises(UnknownNameError, match="mu"):
        found.plot("tau", ax=ax)


def test_contributions_end_at_the_shift(ax: Any) -> None:
    answer = cases.quays().reweigh(_scale(0.02) & sy.power(likelihood=0.8), smooth=False)
    found = attribution_of(answer._scale, answer._target, read_quantity("mu", BASE))
    found.plot(ax=ax)
    ends = [bar.get_x() + bar.get_width() for bar in ax.patches]
    assert ends[-1] == pytest.approx(ends[-2], abs=1e-7)
    assert [t.get_text() for t in ax.get_yticklabels()] == [*found.terms, "shift"]
