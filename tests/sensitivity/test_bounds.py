"""Worst cases: reference values, a linear programme, and exact tilts."""

from __future__ import annotations

import math
from itertools import pairwise
from typing import Any

import numpy as np
import pytest
from scipy import optimize, stats

import steelyard as sy
from steelyard.sensitivity import least_perturbation, worst_case

from . import cases

P77 = cases.case("P7.7")["expected"]
DRAWS = np.array([1.0, 2.0, 3.5, 7.0, 8.0])


def _bare(x: Any) -> Any:
    return sy.Fit({"x": x}, ordered=False)._record


@pytest.mark.parametrize("ratio", [2, 4])
def test_the_ratio_class_on_five_draws(ratio: int) -> None:
    found, expected = (
        worst_case(_bare(DRAWS), "x", ratio=ratio),
        P77[f"draws_density_ratio_K={ratio}"],
    )
    assert found.upper.value == pytest.approx(cases.value(expected["mean_sup"]), rel=1e-10)
    assert found.lower.value == pytest.approx(cases.value(expected["mean_inf"]), rel=1e-10)
    assert found.kind == "bound"


@pytest.mark.parametrize("ratio", [2, 4])
def test_the_ratio_class_of_a_normal_and_of_an_event(ratio: int) -> None:
    """40,000 draws, seed 77; four comparisons at four errors."""
    expected = P77[f"density_ratio_K={ratio}"]
    x = np.random.default_rng(77).normal(1.5, 0.4, size=(4, 10_000))
    base = sy.Fit({"x": x})._record
    found = worst_case(base, "x", ratio=ratio)
    cases.within(found.upper, cases.value(expected["mean_sup"]))
    cases.within(found.lower, cases.value(expected["mean_inf"]))
    cut = stats.norm.ppf(0.95, 1.5, 0.4)
    event = worst_case(base, f"x < {cut}", ratio=ratio)
    cases.within(event.upper, cases.value(expected["prob_0.95_sup"]))
    cases.within(event.lower, cases.value(expected["prob_0.95_inf"]))


@pytest.mark.parametrize("seed", range(5))
def test_a_linear_programme_confirms_the_ratio_class(seed: int) -> None:
    """sup Σ w f over 1 ≤ w_s / (t v_s) ≤ R, Σ w = 1: linear in (w, t) (Charnes & Cooper 1962)."""
    rng = np.random.default_rng(seed)
    n, ratio = 40, float(rng.uniform(1.2, 6))
    f, v = rng.normal(size=n).round(1), rng.dirichlet(np.ones(n))  # rounded: ties occur
    upper = np.hstack([np.eye(n), -ratio * v[:, None]])
    lower = np.hstack([-np.eye(n), v[:, None]])
    solved = [
        optimize.linprog(
            np.append(sign * f, 0),
            A_ub=np.vstack([upper, lower]),
            b_ub=np.zeros(2 * n),
            A_eq=[np.append(np.ones(n), 0)],
            b_eq=[1.0],
            bounds=[(0, None)] * (n + 1),
        )
        for sign in (-1, 1)
    ]
    base = sy.Fit({"x": f}, log_weights=np.log(v), ordered=False)._record
    found = worst_case(base, "x", ratio=ratio)
    # The solver's own tolerance is 1e-9.
    assert found.upper.value == pytest.approx(-solved[0].fun, abs=1e-7)
    assert found.lower.value == pytest.approx(solved[1].fun, abs=1e-7)


@pytest.mark.parametrize("radius", [0.01, 0.1, 0.5])
def test_the_divergence_ball_on_five_draws(radius: float) -> None:
    expected = P77[f"draws_kl_ball_r={radius:g}"]
    found = worst_case(_bare(DRAWS), "x", divergence=radius)
    assert found.upper.value == pytest.approx(cases.value(expected["mean_sup"]), rel=1e-7)
    assert found.lower.value == pytest.approx(cases.value(expected["mean_inf"]), rel=1e-7)
    assert found.kind == "inner bound"
    assert "inner bound" in str(found)


@pytest.mark.parametrize("radius", [0.01, 0.1, 0.5])
@pytest.mark.parametrize("family", ["normal", "gamma"])
def test_the_divergence_ball_of_a_normal_and_a_gamma(radius: float, family: str) -> None:
    """40,000 draws, seed 78; twelve comparisons in all at four errors, false alarm 8e-4."""
    rng = np.random.default_rng(78)
    normal = family == "normal"
    x = rng.normal(1.5, 0.4, (4, 10_000)) if normal else rng.gamma(6, 1 / 7, (4, 10_000))
    name = "normal" if normal else "gamma6,7"
    expected = P77[f"kl_ball_{name}_r={radius:g}"]
    found = worst_case(sy.Fit({"x": x})._record, "x", divergence=radius)
    for estimate, end in ((found.upper, "mean_sup"), (found.lower, "mean_inf")):
        if estimate.verdict.is_sound:
            cases.within(estimate, cases.value(expected[end]))
        else:
            assert radius == 0.5  # a shift of one sd: the last draws carry the tilt
    if normal:
        assert abs(cases.value(expected["mean_sup"]) - 1.5 - 0.4 * math.sqrt(2 * radius)) < 1e-12


def test_a_ball_that_holds_a_single_draw_ends_at_the_draws_and_says_so() -> None:
    found = worst_case(_bare(DRAWS), "x", divergence=5.0)
    assert (found.lower.value, found.upper.value) == (1.0, 8.0)
    assert str(found.upper.verdict.level) == "refit"
    assert found.upper.error == math.inf


def test_wider_classes_hold_narrower_ones() -> None:
    base = cases.quays()._record
    for kind, sizes in (("ratio", (1.1, 1.5, 3.0)), ("divergence", (0.01, 0.1, 1.0))):
        found = [worst_case(base, "mu", **{kind: size}) for size in sizes]
        assert all(a.upper.value < b.upper.value for a, b in pairwise(found))
        assert all(a.lower.value > b.lower.value for a, b in pairwise(found))


def test_the_weights_of_a_bound_reach_it_and_stay_in_the_class() -> None:
    fit = cases.quays()
    found = worst_case(fit._record, "mu", ratio=2.0)
    logs = np.ravel(found.upper_log_weights)
    assert math.exp(np.ptp(logs)) == pytest.approx(2.0)
    mu = np.ravel(fit.draws["mu"])
    assert np.exp(logs) @ mu == pytest.approx(float(found.upper.value), rel=1e-12)
    ball = worst_case(fit._record, "mu", divergence=0.2)
    w = np.exp(np.ravel(ball.lower_log_weights))
    assert w @ np.log(w * len(w)) == pytest.approx(0.2, rel=1e-7)


def test_a_tilt_of_a_normal_to_a_mean() -> None:
    """KL = (shift/sd)²/2, 40,000 draws, seed 79; the tilt is shift/sd²; at four errors."""
    x = np.random.default_rng(79).normal(1.5, 0.4, (4, 10_000))
    found = least_perturbation(sy.Fit({"x": x})._record, "x", 1.7)
    cases.within(found.divergence, 0.125)
    assert found.tilt == pytest.approx(0.2 / 0.16, rel=0.05)
    assert np.mean(found.factor) == pytest.approx(1.0, rel=1e-12)
    assert np.exp(np.ravel(found.log_weights)) @ x.ravel() == pytest.approx(1.7, rel=1e-10)


def test_tilts_of_a_gamma_and_a_beta_to_means() -> None:
    """
    Gamma(a, b) tilted to the mean a/(b − t): KL = a (x − 1 − log x), x the ratio of means.

    The logit of a beta is tilted as log θ − log(1 − θ): Beta(a + t, b − t), whose divergence
    has digamma form. 40,000 draws each, seed 80; two comparisons at four errors.
    """
    from scipy import special

    rng = np.random.default_rng(80)
    g = rng.gamma(6, 1 / 7, (4, 10_000))
    ratio = 1.15
    found = least_perturbation(sy.Fit({"g": g})._record, "g", ratio * 6 / 7)
    cases.within(found.divergence, 6 * (ratio - 1 - math.log(ratio)))
    a, b, t = 20.0, 30.0, 3.0
    p = rng.beta(a, b, (4, 10_000))
    goal = special.digamma(a + t) - special.digamma(b - t)
    divergence = t * goal + special.betaln(a, b) - special.betaln(a + t, b - t)
    found = least_perturbation(
        sy.Fit({"p": p})._record, lambda d: np.log(d["p"] / (1 - d["p"])), float(goal)
    )
    cases.within(found.divergence, float(divergence))


def test_the_least_prior_against_quadrature() -> None:
    """
    Prior N(0, 1), posterior N(0.4, 0.5), P(θ > 0) to 0.7: exact by quadrature and root finding.

    12,000 draws, seed 81. The leverage is smoothed at a width of n^-0.2: its bias stays within
    a tenth of the divergence, which is allowed on top of four errors.
    """
    u = (np.arange(400_000) + 0.5) / 400_000
    phi = stats.norm.ppf(u)
    leverage = stats.norm.pdf(phi, 0.4, 0.5) / stats.norm.pdf(phi) * ((phi > 0) - 0.7)
    eta = optimize.brentq(lambda e: np.mean(np.exp(e * leverage) * leverage), -50, 50)
    factor = np.exp(eta * leverage)
    exact = np.mean(factor * eta * leverage) / np.mean(factor) - math.log(np.mean(factor))
    theta = np.random.default_rng(81).normal(0.4, 0.5, (4, 3000))
    fit = sy.Fit({"theta": theta}, {"theta": sy.Normal(0, 1)})
    found = least_perturbation(fit._record, "theta > 0", 0.7, "theta")
    cases.within(found.divergence, exact, slack=0.1 * exact)
    weights = np.exp(np.ravel(found.log_weights))
    assert weights @ (theta.ravel() > 0) == pytest.approx(0.7, abs=1e-6)
    shape = found.prior
    assert shape is not None
    h = np.diff(shape.values)
    for density in (shape.stated, shape.implied):
        assert h @ (density[1:] + density[:-1]) / 2 == pytest.approx(1.0, abs=0.01)
    # A shift grid would ask for far more: the mean that flips costs m²/2.
    mean = optimize.brentq(
        lambda m: stats.norm.sf(0, (0.4 / 0.25 - 0 / 1 + m) / 4, 0.5) - 0.7, -20, 20
    )
    assert float(found.divergence.value) < mean**2 / 2


def test_the_change_of_the_prior_is_one_of_that_parameter_alone() -> None:
    fit = cases.quays()
    found = least_perturbation(fit._record, "rate[1] > 0.12", 0.4, "tau")
    tau, factor = np.ravel(fit.draws["tau"]), np.ravel(found.factor)
    order = np.argsort(tau)
    # A function of τ: every second draw tells the others, where draws are dense.
    at, log = tau[order], np.log(factor[order])
    told = np.interp(at[1::2], at[::2], log[::2])
    assert np.abs(told - log[1::2])[50:-50].max() < 0.05
    assert "prior of tau" in str(found)


@pytest.mark.parametrize("seed", [75, 76])
def test_bounds_under_any_contamination_of_the_prior(seed: int) -> None:
    """
    P7.5: 0.9 N(0, √2) + 0.1 q with q any prior; 40,000 draws, eight comparisons at four errors.

    The extremes are point masses: for the event at its own edge, for the mean inside the draws.
    """
    found = cases.case("P7.5")
    expected, share = found["expected"], found["inputs"]["eps"]
    low, high = cases.value(expected["C"])
    mean, sd = (cases.value(expected[name]) for name in ("base_mean", "base_sd"))
    theta = np.random.default_rng(seed).normal(mean, sd, size=(4, 10_000))
    fit = sy.Fit({"theta": theta}, {"theta": sy.Normal(0, math.sqrt(2))})
    asked = {"prob": (theta >= low) & (theta <= high), "mean": "theta"}
    for name, quantity in asked.items():
        bounds = fit.worst_case(quantity, contamination=share, prior_of="theta")
        assert bounds.kind == "inner bound"
        cases.within(bounds.upper, cases.value(expected[f"{name}_sup_all"]))
        cases.within(bounds.lower, cases.value(expected[f"{name}_inf_all"]))


def test_contamination_reaches_what_does_not_hang_on_the_parameter_alone() -> None:
    """
    Two normals of correlation 0.6: E[y | x] = 0.6 x, so that both ends are 0.6 times those of x.

    20,000 draws, seed 77; two comparisons at four errors of both.
    """
    rng = np.random.default_rng(77)
    x = rng.normal(0.5, 0.8, size=(4, 5000))
    y = 0.6 * x + 0.5 * rng.normal(size=x.shape)
    fit = sy.Fit({"x": x, "y": y}, {"x": sy.Normal(0, 1.5)})
    of_x = fit.worst_case("x", contamination=0.2, prior_of="x")
    of_y = fit.worst_case("y", contamination=0.2, prior_of="x")
    for one, other in ((of_x.lower, of_y.lower), (of_x.upper, of_y.upper)):
        assert abs(other.value - 0.6 * one.value) <= 4 * (other.error + 0.6 * one.error)
    assert of_x.lower.value < fit.base.mean("x").value < of_x.upper.value
