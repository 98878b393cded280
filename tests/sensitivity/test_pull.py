"""Power scaling: conjugate closed forms, the distance on ten draws, and what the words rest on."""

from __future__ import annotations

import math
from typing import Any

import numpy as np
import pytest
from scipy import stats

import steelyard as sy
from steelyard.errors import ChangeError
from steelyard.sensitivity import pull, sweep

from . import cases

POWERS = [0.5, 0.8, 1.25, 2.0]


def _named(kind: str, power: float, what: str) -> str:
    return f"{kind}_power_{power:g}_{what}"


@pytest.mark.parametrize(("identifier", "prior"), [("P7.1", (0.0, 2.0)), ("P7.2", (5.0, 0.5))])
@pytest.mark.parametrize("kind", ["prior", "likelihood"])
def test_powers_of_a_normal_model(identifier: str, prior: Any, kind: str) -> None:
    """40,000 independent draws, seed 71; eight comparisons at four errors, false alarm 5e-4."""
    expected = cases.case(identifier)["expected"]
    fit = cases.sleep_fit(prior, 4, 10_000, 71)
    swept = sweep(fit._record, lambda a: sy.power(**{kind: a}), POWERS, "theta")
    for place, power in enumerate(POWERS):
        away = swept.value["theta"][place] - cases.value(expected[_named(kind, power, "mean")])
        assert abs(away) <= 4 * swept.error["theta"][place], power
        sd = fit.reweigh(sy.power(**{kind: power})).sd("theta")
        if sd.verdict.is_sound:
            cases.within(sd, cases.value(expected[_named(kind, power, "sd")]))
        else:
            # Strong powers of a model in conflict move the mean by sds: only there.
            assert identifier == "P7.2"
            assert power in (0.5, 2.0)


@pytest.mark.parametrize("seed", range(71, 77))
def test_an_sd_that_the_draws_do_not_reach_is_not_sound(seed: int) -> None:
    """
    P7.2, half the likelihood: the target lies 1.9 base sds off and reaches beyond all draws.

    Its weights have a finite variance (tail index 0.31 by algebra), so that only the contributions
    can tell: their shape is above 2, and few of them carry the sd.
    """
    fit = cases.sleep_fit((5.0, 0.5), 4, 10_000, seed)
    found = fit.reweigh(sy.power(likelihood=0.5)).sd("theta")
    truth = cases.value(cases.case("P7.2")["expected"]["likelihood_power_0.5_sd"])
    assert not found.verdict.is_sound
    low, high = found.error_interval(0.9999)
    assert low <= truth <= high


@pytest.mark.parametrize("identifier", ["P7.3", "P7.4"])
def test_powers_of_beta_and_gamma_models(identifier: str) -> None:
    """40,000 draws, seed 72; eight comparisons at four errors."""
    expected = cases.case(identifier)["expected"]
    rng = np.random.default_rng(72)
    if identifier == "P7.3":
        x = rng.beta(48.5 + 437, 51.5 + 543, size=(4, 10_000))
        fit = sy.Fit({"x": x}, {"x": sy.Beta(48.5, 51.5)}, 437 * np.log(x) + 543 * np.log1p(-x))
    else:
        x = rng.gamma(6.0, 1 / 7.0, size=(4, 10_000))
        fit = sy.Fit({"x": x}, {"x": sy.Gamma(3, 5)}, 3 * np.log(x) - 2 * x)
    for kind in ("prior", "likelihood"):
        swept = sweep(fit._record, lambda a, k=kind: sy.power(**{k: a}), POWERS, "x")
        for place, power in enumerate(POWERS):
            if not swept.trusted[place]:
                continue
            away = swept.value["x"][place] - cases.value(expected[_named(kind, power, "mean")])
            assert abs(away) <= 4 * swept.error["x"][place], (kind, power)
        assert swept.trusted.sum() >= 2


@pytest.mark.parametrize(("identifier", "prior"), [("P7.1", (0.0, 2.0)), ("P7.2", (5.0, 0.5))])
def test_the_slope_in_the_log_of_the_power(identifier: str, prior: Any) -> None:
    """d E/d log2 α at 1, central difference on the same 40,000 draws, seed 70; two comparisons."""
    expected = cases.case(identifier)["expected"]
    fit = cases.sleep_fit(prior, 4, 10_000, 70)
    for kind in ("prior", "likelihood"):
        up, down = (fit.reweigh(sy.power(**{kind: 2.0**e})).shift("theta") for e in (0.01, -0.01))
        slope = (up.value - down.value) / 0.02
        error = (up.error + down.error) / 0.02
        assert abs(slope - cases.value(expected[f"d_mean_d_log2alpha_{kind}"])) <= 4 * error


def test_the_cumulative_distance_on_ten_draws() -> None:
    """P7.8, deterministic; raw weights, since ten draws have no tail to smooth."""
    found = cases.case("P7.8")
    answer = sy.weigh(np.array(found["inputs"]["log_weights"]), smooth=False)
    distance = answer.distance(np.array(found["inputs"]["draws"])).jensen_shannon.value
    assert distance == pytest.approx(cases.value(found["expected"]["distance_max"]), rel=1e-9)


def test_the_pull_of_a_normal_model_by_quadrature() -> None:
    """
    P7.2's model, 40,000 draws, seed 4.

    The distance is scaled by the range of the draws: the quadrature is cut at that range.
    """
    prior = (5.0, 0.5)
    fit = cases.sleep_fit(prior, 4, 10_000, 4)
    found = pull(fit._record, "theta")
    mean, sd = cases.normal_posterior(prior)
    theta = fit.draws["theta"]
    low, high = (theta.min() - mean) / sd, (theta.max() - mean) / sd
    ends = []
    for power in (1 / 1.01, 1.01):
        m, s = _powered(prior, power)
        ends.append(((m - mean) / sd, s / sd))
    x = np.linspace(low, high, 20_001)
    exact = _exact_on(x, ends)
    cases.within(found.prior, exact)


def _powered(prior: tuple[float, float], power: float) -> tuple[float, float]:
    return cases.normal_posterior((prior[0], prior[1] / math.sqrt(power)))


def _exact_on(x: Any, ends: list[tuple[float, float]]) -> float:
    h = x[1] - x[0]
    total = 0.0
    for mean, sd in ends:
        found = []
        for p, q in (
            (stats.norm.cdf(x, mean, sd), stats.norm.cdf(x)),
            (stats.norm.sf(x, mean, sd), stats.norm.sf(x)),
        ):
            divergence = (p * np.log2(2 * p / (p + q)) + q * np.log2(2 * q / (p + q))).sum() * h
            found.append(math.sqrt(max(divergence, 0.0) / ((p + q).sum() * h)))
        total += max(found)
    return 0.5 * total / math.log2(1.01)


def test_a_prior_in_conflict_pulls_apart_and_a_weak_one_lets_the_data_carry() -> None:
    conflict = pull(cases.sleep_fit((5.0, 0.5), 4, 1000, 5)._record, "theta")
    assert conflict.reading == {"theta": "prior and data pull it apart"}
    weak = pull(cases.sleep_fit((1.5, 50.0), 4, 1000, 5)._record, "theta")
    assert weak.reading == {"theta": "the data carry it"}
    x = np.random.default_rng(5).normal(size=(4, 1000))
    alone = pull(sy.Fit({"x": x}, {"x": sy.Normal(0, 1)})._record, "x")
    assert alone.likelihood is None
    assert alone.reading == {"x": "the prior carries it"}


def test_terms_are_told_apart_and_tabulated() -> None:
    found = pull(cases.quays()._record, ["mu", "rate"])
    assert set(found.by_term) == {
        "prior: rate",
        "prior: mu",
        "prior: tau",
        "likelihood: A",
        "likelihood: B",
    }
    assert found.elements == ("mu", "rate[0]", "rate[1]", "rate[2]", "rate[3]")
    assert len(found.table()) == 5
    assert "reading" in str(found)


def test_a_fit_of_draws_alone_has_nothing_to_scale() -> None:
    with pytest.raises(ChangeError, match="neither"):
        pull(sy.Fit({"x": np.arange(10.0)})._record)
