"""Expert statements, Bayes factors between priors, least data, and attribution."""

from __future__ import annotations

import math
import pickle
from typing import Any

import numpy as np
import pytest
from scipy import stats

import steelyard as sy
from steelyard.answers.attribution import attribution_of
from steelyard.answers.quantities import read_quantity
from steelyard.errors import ArgumentTypeError, ChangeError, ShapeError, UnknownNameError
from steelyard.sensitivity import least_data, prior_factors, statements

from . import cases


def _attribute(answer: Any, quantity: Any, **options: Any) -> Any:
    read = read_quantity(quantity, answer._base, events=True)
    return attribution_of(answer._scale, answer._target, read, **options)


def test_one_statement_has_factors_stated_over_base() -> None:
    fit = cases.quays()
    base = float(fit.base.prob("mu < 0.1").value)
    found = statements(fit._record, {"mu < 0.1": 0.8})
    odds = 0.8 / 0.2 / (base / (1 - base))
    assert found.multipliers["mu < 0.1"] == pytest.approx(math.log(odds), rel=1e-9)
    assert found.largest_ratio == pytest.approx(max(odds, 1 / odds), rel=1e-9)
    divergence = 0.8 * math.log(0.8 / base) + 0.2 * math.log(0.2 / (1 - base))
    assert found.divergence == pytest.approx(divergence, rel=1e-9)
    answer = fit.reweigh(found.change)
    assert answer.prob("mu < 0.1").value == pytest.approx(0.8, rel=1e-6)


def test_several_statements_hold_together_at_the_least_divergence() -> None:
    fit = cases.quays()
    stated = {"mu < 0.1": 0.6, "rate[1] > 0.12": 0.3, "tau > 0.02": 0.5}
    found = statements(fit._record, stated)
    answer = fit.reweigh(found.change, smooth=False)
    for event, probability in stated.items():
        assert answer.prob(event).value == pytest.approx(probability, abs=1e-9)
    # Any mix with another reweighing that meets them diverges more: Pythagoras (Csiszár 1975).
    w = np.ravel(answer.weights)
    masks = np.stack([np.ravel(read_quantity(e, fit._record, events=True).values) for e in stated])
    rng = np.random.default_rng(3)
    noise = rng.normal(size=len(w)) * w
    span = np.vstack([masks, np.ones(len(w))])
    noise -= (span.T * w[:, None]) @ np.linalg.solve((span * w) @ span.T, span @ noise)
    other = w + 0.2 * noise * (w / np.abs(noise)).min()
    assert np.allclose(masks @ other, list(stated.values()))

    def against_base(weights: Any) -> float:
        return float(weights @ np.log(weights * len(weights)))

    assert against_base(other) > against_base(w)
    assert against_base(w) == pytest.approx(found.divergence, rel=1e-9)


def test_a_statement_that_follows_from_another_is_no_contradiction() -> None:
    found = statements(cases.quays()._record, {"mu < 0.1": 0.6, "mu >= 0.1": 0.4})
    assert found.stated["mu >= 0.1"] == 0.4


def test_bayes_factors_between_normal_priors() -> None:
    """Marginal likelihoods in closed form; 40,000 draws, seed 61; four comparisons."""
    fit = cases.sleep_fit((0.0, 2.0), 4, 10_000, 61)
    priors = {"wide": sy.Normal(0, 2.5), "near": sy.Normal(1, 1.5)}
    changes = {k: sy.swap_prior(theta=p) for k, p in priors.items()}
    mean, variance = cases.SLEEP.mean(), cases.SIGMA**2 / 10

    def log_marginal(prior: Any) -> float:
        return float(stats.norm.logpdf(mean, prior.mean, math.sqrt(prior.sd**2 + variance)))

    against = log_marginal(sy.Normal(0, 2))
    found = prior_factors(fit._record, changes)
    for label, prior in priors.items():
        cases.within(found.log_factor[label], log_marginal(prior) - against)
    pair = prior_factors(fit._record, changes, "wide")
    difference = log_marginal(priors["near"]) - log_marginal(priors["wide"])
    cases.within(pair.log_factor["near"], difference)
    # Shared draws: the pair is known better than its parts added up.
    parts = [found.log_factor[label].error for label in priors]
    assert pair.log_factor["near"].error < math.hypot(*parts)
    assert found.table()["prior"][0] == "near"
    assert "against wide" in str(pair)


def test_least_data_of_a_conjugate_model() -> None:
    """
    Pseudo-observations at 0 of sd 1: n of them move N(μ, 1/p) to N(μ p/(p + n), 1/(p + n)).

    16,000 draws, seed 62; the exact real root lies within four errors.
    """
    p = 25.0
    x = np.random.default_rng(62).normal(0.5, p**-0.5, size=(4, 4000))
    found = least_data(
        sy.Fit({"x": x})._record, "x > 0.3", 0.7, lambda d: -0.5 * d["x"] ** 2, most=20
    )

    def gap(n: float) -> float:
        return float(stats.norm.sf(0.3, 0.5 * p / (p + n), (p + n) ** -0.5)) - 0.7

    exact = next(n for n in np.arange(0, 20, 0.001) if gap(n) <= 0)
    assert found.status == "flips"
    assert abs(found.tipping.at - exact) <= 4 * found.tipping.error + 0.001
    assert found.count == math.ceil(found.tipping.at)
    assert str(found.count) in str(found)


def test_least_data_says_how_far_it_can_tell() -> None:
    x = np.random.default_rng(63).normal(0.5, 0.2, size=(4, 500))
    base = sy.Fit({"x": x})._record
    far = least_data(base, "x > 0.3", 0.001, lambda d: -5 * (d["x"] + 3) ** 2, most=1000)
    assert (far.status, far.count) == ("unknown", None)
    assert far.at_least is not None
    holds = least_data(base, "x > 0.3", 0.001, lambda d: -0.001 * d["x"] ** 2, most=5)
    assert (holds.status, holds.at_least) == ("holds", 5)


CHANGE = sy.swap_prior(tau=sy.HalfNormal(0.02), mu=sy.Normal(0.08, 0.05)) & sy.power(likelihood=0.8)


@pytest.mark.parametrize("quantity", ["mu", "rate", "rate[1] > 0.12"])
def test_contributions_add_up_to_the_shift(quantity: str) -> None:
    answer = cases.quays().reweigh(CHANGE, smooth=False)
    found = _attribute(answer, quantity)
    assert list(found.terms) == ["prior: tau", "prior: mu", "likelihood: A", "likelihood: B"]
    total = sum(np.asarray(t.value) for t in found.terms.values())
    # Twelve nodes integrate a smooth path far below any Monte Carlo error.
    np.testing.assert_allclose(total, found.shift.value, rtol=0, atol=1e-7)
    np.testing.assert_allclose(found.residual, 0, atol=1e-7)
    assert np.all(np.asarray(found.residual_error) < 1e-3 * np.asarray(found.shift.error))


def test_smoothing_leaves_a_residual_within_its_error() -> None:
    answer = cases.quays().reweigh(CHANGE)
    found = _attribute(answer, "mu")
    total = sum(float(t.value) for t in found.terms.values())
    assert found.shift.value == pytest.approx(total + found.residual, rel=1e-12)
    assert abs(found.residual) <= 4 * found.residual_error + 1e-9
    assert "residual" in str(found)


def test_contributions_of_a_normal_model_are_the_exact_ones() -> None:
    """
    Prior mean moved and data weighed at once; the path stays normal, so that contributions are
    one-dimensional integrals. 40,000 draws, seed 64; two comparisons at four errors.
    """
    fit = cases.sleep_fit((0.0, 2.0), 4, 10_000, 64)
    change = sy.swap_prior(theta=sy.Normal(1.0, 2.0)) & sy.power(likelihood=0.9)
    found = _attribute(fit.reweigh(change), "theta")
    n, s2, v = 10, cases.SIGMA**2, 4.0
    exact = {"prior: theta": 0.0, "likelihood: sleep": 0.0}
    grid = (np.arange(2000) + 0.5) / 2000
    for lam in grid:
        precision = 1 / v + n / s2 * (1 - 0.1 * lam)
        mean = (lam * 1.0 / v + (1 - 0.1 * lam) * cases.SLEEP.sum() / s2) / precision
        variance = 1 / precision
        # Cov(θ, θ m/v) and Cov(θ, −0.1 Σ L) = 0.1 n (mean − ȳ) variance / s2.
        exact["prior: theta"] += variance / v / 2000
        exact["likelihood: sleep"] += 0.1 * n * (mean - cases.SLEEP.mean()) * variance / s2 / 2000
    for label, expected in exact.items():
        cases.within(found.terms[label], expected, slack=1e-6)


def test_groups_and_blocks_split_and_join() -> None:
    answer = cases.quays().reweigh(CHANGE, smooth=False)
    plain = _attribute(answer, "mu")
    joined = _attribute(answer, "mu", groups={"priors": ["prior: tau", "prior: mu"]})
    assert list(joined.terms) == ["priors", "likelihood: A", "likelihood: B"]
    both = plain.terms["prior: tau"].value + plain.terms["prior: mu"].value
    assert joined.terms["priors"].value == pytest.approx(both, rel=1e-9)
    split = _attribute(answer, "mu", blocks={"A": ["east", "east", "west", "west"]})
    parts = split.terms["A: east"].value + split.terms["A: west"].value
    assert parts == pytest.approx(plain.terms["likelihood: A"].value, rel=1e-9)
    again = pickle.loads(pickle.dumps(split))
    assert list(again.terms) == list(split.terms)


def test_blocks_of_replaced_and_dropped_observations() -> None:
    fit = cases.quays()
    old = np.asarray(fit._record.loglik["A"].source)
    answer = fit.reweigh(sy.swap_loglik({"A": old * 0.9}) & sy.drop({"B": [1]}), smooth=False)
    split = _attribute(answer, "mu", blocks={"A": [0, 0, 1, 1], "B": [0, 1, 2]})
    assert split.terms["B: 0"].value == pytest.approx(0, abs=1e-15)
    assert split.terms["B: 1"].value != 0
    np.testing.assert_allclose(split.residual, 0, atol=1e-7)


def test_draws_outside_the_new_support_have_a_row_of_their_own() -> None:
    x = np.random.default_rng(65).normal(size=(4, 2000))
    fit = sy.Fit({"x": x}, {"x": sy.Normal(0, 1)}, -0.1 * x**2)
    answer = fit.reweigh(sy.swap_prior(x=sy.Flat(-math.inf, 1.5)), smooth=False)
    found = _attribute(answer, "x")
    assert list(found.terms) == ["prior: x", "outside the new support"]
    cut = x[x <= 1.5].mean() - x.mean()
    assert found.terms["outside the new support"].value == pytest.approx(cut, rel=1e-9)
    assert abs(found.residual) < 1e-5


def test_what_cannot_be_attributed_is_refused() -> None:
    fit = cases.quays()
    answer = fit.reweigh(CHANGE)
    with pytest.raises(ChangeError, match="under a change"):
        _attribute(fit.base, "mu")
    with pytest.raises(UnknownNameError, match="prior: tau"):
        _attribute(answer, "mu", groups={"g": ["prior: tua"]})
    with pytest.raises(ChangeError, match="each term in one group"):
        _attribute(answer, "mu", groups={"g": ["prior: tau"], "h": ["prior: tau"]})
    with pytest.raises(ArgumentTypeError, match="list of terms"):
        _attribute(answer, "mu", groups=["prior: tau"])
    with pytest.raises(UnknownNameError, match="likelihood term"):
        _attribute(answer, "mu", blocks={"C": [1]})
    with pytest.raises(ShapeError, match=r"\(4,\)"):
        _attribute(answer, "mu", blocks={"A": [1, 2]})
    with pytest.raises(ArgumentTypeError, match="label an observation"):
        _attribute(answer, "mu", blocks=[1])


def test_every_interval_knows_its_degrees_of_freedom() -> None:
    """Series formed outside of the common path: pulls, contributions, a prior's divergence."""
    fit = cases.quays()
    answer = fit.reweigh(sy.swap_prior(tau=sy.HalfNormal(0.02)))
    pulled = fit.pull("mu").prior
    parts = answer.attribute("mu").terms.values()
    implied = fit.least_perturbation("mu", fit.base.mean("mu").value + 0.004, prior_of="mu")
    assert pulled is not None
    for estimate in (pulled, *parts, implied.divergence, fit.local("mu").derivative["mu"]["mean"]):
        degrees = np.asarray(estimate.degrees)
        assert (degrees >= 1).all()
        assert np.isfinite(degrees).all()
        half = np.diff(estimate.error_interval(0.95), axis=0)[0] / 2
        assert (half >= 1.9599 * np.asarray(estimate.error)).all()
