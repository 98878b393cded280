"""Derivatives in hyperparameters: conjugate closed forms, and finite differences by reweighing."""

from __future__ import annotations

from typing import Any

import numpy as np
import pytest

import steelyard as sy
from steelyard.errors import ArgumentError, PriorError
from steelyard.sensitivity import local

from . import cases


@pytest.mark.parametrize(("identifier", "prior"), [("P7.1", (0.0, 2.0)), ("P7.2", (5.0, 0.5))])
def test_derivatives_of_a_normal_mean(identifier: str, prior: tuple[float, float]) -> None:
    """40,000 independent draws, seed 7; three comparisons at four errors, false alarm 2e-4."""
    expected = cases.case(identifier)["expected"]["local"]
    fit = cases.sleep_fit(prior, 4, 10_000, 7)
    found = local(fit._record, "theta").derivative["theta"]
    assert list(found) == ["mean", "sd"]
    assert found["mean"].value.shape == (1,)
    cases.within(found["mean"], cases.value(expected["d_mean_d_prior_mean"]))
    cases.within(found["sd"], cases.value(expected["d_mean_d_prior_sd"]))
    of_sd = local(fit._record, "theta", of="sd").derivative["theta"]["sd"]
    _, sd = cases.normal_posterior(prior)
    cases.within(of_sd, cases.value(expected["d_var_d_prior_sd"]) / (2 * sd))


def test_derivatives_under_beta_and_gamma_priors() -> None:
    """P7.3 and P7.4, 40,000 draws each, seed 73; four comparisons at four errors."""
    rng = np.random.default_rng(73)
    share = rng.beta(48.5 + 437, 51.5 + 543, size=(4, 10_000))
    found = local(sy.Fit({"p": share}, {"p": sy.Beta(48.5, 51.5)})._record, "p").derivative["p"]
    rate = rng.gamma(6.0, 1 / 7.0, size=(4, 10_000))
    other = local(sy.Fit({"r": rate}, {"r": sy.Gamma(3, 5)})._record, "r").derivative["r"]
    three, four = cases.case("P7.3")["expected"], cases.case("P7.4")["expected"]
    cases.within(found["a"], cases.value(three["d_mean_da"]))
    cases.within(found["b"], cases.value(three["d_mean_db"]))
    cases.within(other["shape"], cases.value(four["d_mean_da"]))
    cases.within(other["rate"], cases.value(four["d_mean_db"]))


def test_finite_differences_by_reweighing_agree() -> None:
    """Central differences on the same draws: what is left is their third-order term."""
    fit, step = cases.quays(), 1e-4
    found = local(fit._record, {"mu": "mu", "high": "rate[1] > 0.12"})

    def moved(by: float) -> Any:
        answer = fit.reweigh(sy.swap_prior(tau=sy.HalfNormal(0.05 + by)), smooth=False)
        return np.array([answer.mean("mu").value, answer.prob("rate[1] > 0.12").value])

    difference = (moved(step) - moved(-step)) / (2 * step)
    np.testing.assert_allclose(found.derivative["tau"]["scale"].value, difference, rtol=1e-4)


def test_hyperparameters_that_are_parameters_are_skipped_and_said() -> None:
    found = local(cases.quays()._record, "mu")
    assert "rate" in found.skipped
    assert set(found.derivative) == {"mu", "tau"}
    assert "rate: all its hyperparameters are parameters" in str(found)


def test_an_array_of_hyperparameters_has_a_derivative_for_each_entry() -> None:
    rng = np.random.default_rng(5)
    x = rng.normal(size=(4, 500, 3))
    shared = local(sy.Fit({"x": x}, {"x": sy.Normal(0, 2)})._record, "x[0]")
    apart = local(sy.Fit({"x": x}, {"x": sy.Normal([0, 0, 0], 2)})._record, "x[0]")
    assert apart.derivative["x"]["mean"].value.shape == (3, 1)
    total = apart.derivative["x"]["mean"].value.sum()
    np.testing.assert_allclose(shared.derivative["x"]["mean"].value[0], total, rtol=1e-10)


def test_the_standardised_derivative_says_its_step() -> None:
    fit = cases.sleep_fit((0.0, 2.0), 4, 500, 2)
    found = local(fit._record, "theta")
    sd = fit.base.sd("theta").value
    for name in ("mean", "sd"):
        assert found.step["theta"][name] == 2.0
        expected = found.derivative["theta"][name].value * 2.0 / sd
        np.testing.assert_allclose(found.standardised["theta"][name].value, expected, rtol=1e-12)
    assert list(found.table().columns)[:3] == ["term", "hyperparameter", "quantity"]


def test_without_a_prior_or_with_another_functional_it_is_refused() -> None:
    with pytest.raises(PriorError, match="prior is stated"):
        local(sy.Fit({"x": np.arange(10.0)})._record)
    with pytest.raises(ArgumentError, match="'mean' or 'sd'"):
        local(cases.quays()._record, "mu", of="median")


@pytest.mark.parametrize("sd", [1e-150, 1e150])
def test_slopes_in_a_huge_or_tiny_scale_are_those_of_the_plain_one(sd: float) -> None:
    # Draws in units of the prior sd: a derivative in the sd is then in that unit too.
    x = np.random.default_rng(31).normal(size=(4, 100)) * 0.5
    plain = sy.Fit({"mu": x}, {"mu": sy.Normal(0, 1)}).local("mu").derivative["mu"]
    scaled = sy.Fit({"mu": sd * x}, {"mu": sy.Normal(0, sd)}).local("mu").derivative["mu"]
    for name, slope in plain.items():
        # 1e-11 relative: a handful of roundings, some of them in the score.
        np.testing.assert_allclose(scaled[name].value, slope.value, rtol=1e-11)
        np.testing.assert_allclose(scaled[name].error, slope.error, rtol=1e-11)
