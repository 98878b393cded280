"""What algebra knows before any weight is computed: tail shapes, supports, pressure at an edge.

Base draws are standardised so that their sample moments are exactly those of the posterior in the
algebra; figures then agree to 1e-9 (a covariance of 1,000 draws and an eigenvalue).
"""

from __future__ import annotations

from typing import Any

import numpy as np
import pytest
from scipy import stats

import steelyard as sy

SEED = 20_261_215
N = 1000
VALUES = np.random.default_rng(SEED + 9).gamma(2, 0.01, size=(N, 2))


def _standard(seed: int, width: int = 1) -> np.ndarray:
    """Draws with mean 0, unit covariance (divided by n − 1), no correlation: to rounding."""
    z = np.random.default_rng(seed).normal(size=(N, width))
    z -= z.mean(axis=0)
    root = np.linalg.cholesky(np.cov(z, rowvar=False).reshape(width, width))
    return np.linalg.solve(root, z.T).T


def _figure(answer: sy.Answer, code: str) -> float:
    found = [f for f in answer.verdict.findings if f.code == code]
    assert len(found) == 1, [f.code for f in answer.verdict.findings]
    return float(found[0].figure)


def _codes(answer: sy.Answer) -> set[str]:
    return {reason.code for reason in answer.verdict.reasons}


def _normal_fit(posterior_sd: float, prior: Any, **more: Any) -> sy.Fit:
    return sy.Fit({"mu": posterior_sd * _standard(SEED)[:, 0]}, prior={"mu": prior}, **more)


@pytest.mark.parametrize(
    ("posterior_sd", "old", "new"), [(0.5, 1.0, 3.0), (0.8, 1.0, 1.5), (0.3, 2.0, 2.1)]
)
def test_a_widened_normal_prior_has_the_tail_shape_of_the_normal_algebra(
    posterior_sd: float, old: float, new: float
) -> None:
    # Weights exp(½ A x²), x ~ N(0, V): P(w > t) ~ t^(−1/(A V)), so the shape is A V.
    answer = _normal_fit(posterior_sd, sy.Normal(0, old)).reweigh(
        sy.swap_prior(mu=sy.Normal(7, new))
    )
    shape = posterior_sd**2 * (1 / old**2 - 1 / new**2)
    assert _figure(answer, "prior_widened") == pytest.approx(shape, rel=1e-9)


@pytest.mark.parametrize("flat", [sy.Flat(), sy.StudentT(3, 0, 1)], ids=str)
def test_a_normal_prior_widened_to_a_flat_one_has_the_shape_of_the_variance_ratio(
    flat: Any,
) -> None:
    answer = _normal_fit(0.6, sy.Normal(0, 1)).reweigh(sy.swap_prior(mu=flat))
    assert _figure(answer, "prior_widened") == pytest.approx(0.36, rel=1e-9)


@pytest.mark.parametrize(("variance", "level"), [(0.499, "sound"), (0.501, "strained")])
def test_widening_to_flat_is_flagged_where_the_posterior_variance_exceeds_half_the_prior_one(
    variance: float, level: str
) -> None:
    # METHODS 3: the weights have finite variance only below one half.
    answer = _normal_fit(np.sqrt(variance), sy.Normal(0, 1)).reweigh(sy.swap_prior(mu=sy.Flat()))
    (finding,) = [f for f in answer.verdict.findings if f.code == "prior_widened"]
    assert ("prior_widened" in _codes(answer)) == (level == "strained")
    assert int(finding.rank) == {"sound": 2, "strained": 1}[level]


def test_at_exactly_one_half_the_variance_is_infinite_already() -> None:
    fit = _normal_fit(1.0, sy.Flat(), loglik={"gauge A": -VALUES})
    assert "likelihood_loosened" in _codes(fit.reweigh(sy.power(likelihood=0.5)))
    assert "likelihood_loosened" not in _codes(fit.reweigh(sy.power(likelihood=0.51)))


def test_several_widened_normal_priors_count_by_the_largest_eigenvalue() -> None:
    mixing = np.array([[0.5, 0.0, 0.0], [0.3, 0.4, 0.0], [-0.2, 0.1, 0.3]])
    draws = _standard(SEED + 1, 3) @ mixing.T
    fit = sy.Fit(
        {"mu": draws[:, 0], "rate": draws[:, 1:]},
        prior={"mu": sy.Normal(0, 1), "rate": sy.Normal(0, [0.9, 1.1])},
    )
    answer = fit.reweigh(sy.swap_prior(mu=sy.Normal(0, 2), rate=sy.Normal(0, 3)))
    loosened = np.diag([1 - 1 / 4, 1 / 0.81 - 1 / 9, 1 / 1.21 - 1 / 9])
    largest = np.max(np.linalg.eigvals(mixing @ mixing.T @ loosened).real)
    assert _figure(answer, "prior_widened") == pytest.approx(largest, rel=1e-9)


def test_one_prior_tightened_while_another_is_widened_helps_where_they_are_correlated() -> None:
    mixing = np.array([[0.5, 0.0], [0.45, 0.1]])
    draws = _standard(SEED + 2, 2) @ mixing.T
    fit = sy.Fit(
        {"a": draws[:, 0], "b": draws[:, 1]}, prior={"a": sy.Normal(0, 1), "b": sy.Normal(0, 1)}
    )
    answer = fit.reweigh(sy.swap_prior(a=sy.Normal(0, 9), b=sy.Normal(0, 0.5)))
    loosened = np.diag([1 - 1 / 81, 1 - 4])
    largest = np.max(np.linalg.eigvals(mixing @ mixing.T @ loosened).real)
    assert _figure(answer, "prior_widened") == pytest.approx(largest, rel=1e-9)


def test_a_power_of_a_normal_prior_is_a_widening_too() -> None:
    answer = _normal_fit(0.7, sy.Normal(0, 1)).reweigh(sy.power(prior=0.25))
    assert _figure(answer, "prior_widened") == pytest.approx(0.49 * 0.75, rel=1e-9)


def test_a_power_and_a_swap_are_one_target() -> None:
    change = sy.swap_prior(mu=sy.Normal(0, 2)) & sy.power(prior=0.5)
    answer = _normal_fit(0.7, sy.Normal(0, 1)).reweigh(change)
    assert _figure(answer, "prior_widened") == pytest.approx(0.49 * (1 - 0.5 / 4), rel=1e-9)


def test_a_tightened_normal_prior_has_no_such_finding() -> None:
    answer = _normal_fit(0.7, sy.Normal(0, 1)).reweigh(sy.swap_prior(mu=sy.Normal(0, 0.9)))
    assert "prior_widened" not in {f.code for f in answer.verdict.findings}


def _matched(x: np.ndarray, mean: float, variance: float) -> np.ndarray:
    return mean + (x - x.mean()) / x.std() * np.sqrt(variance)


@pytest.mark.parametrize(("old", "new"), [((3, 5), (1, 1)), ((3, 2), (2, 2.5)), ((2, 9), (2, 1))])
def test_a_widened_gamma_prior_has_the_tail_shape_of_the_conjugate_algebra(
    old: tuple[float, float], new: tuple[float, float]
) -> None:
    # Posterior Gamma(A, B): weights x^(s₁ − s₀) exp((r₀ − r₁) x) have shape (r₀ − r₁)/B at
    # infinity and (s₀ − s₁)/A at zero.
    a, b = old[0] + 3, old[1] + 2
    x = stats.gamma(a, scale=1 / b).ppf((np.arange(N) + 0.5) / N)
    x = _matched(x, a / b, a / b**2)
    fit = sy.Fit({"rate": x}, prior={"rate": sy.Gamma(*old)})
    assert (x > 0).all()
    shape = max((old[1] - new[1]) / b, (old[0] - new[0]) / a)
    answer = fit.reweigh(sy.swap_prior(rate=sy.Gamma(*new)))
    assert _figure(answer, "prior_widened") == pytest.approx(shape, rel=1e-9)


@pytest.mark.parametrize(("old", "new"), [((4, 6), (1, 1)), ((3, 1), (1, 2)), ((1, 5), (1, 2))])
def test_a_widened_beta_prior_has_the_tail_shape_of_the_conjugate_algebra(
    old: tuple[float, float], new: tuple[float, float]
) -> None:
    a, b = old[0] + 40, old[1] + 60
    posterior = stats.beta(a, b)
    x = _matched(posterior.ppf((np.arange(N) + 0.5) / N), posterior.mean(), posterior.var())
    fit = sy.Fit({"share": x}, prior={"share": sy.Beta(*old)})
    shape = max((old[0] - new[0]) / a, (old[1] - new[1]) / b)
    answer = fit.reweigh(sy.swap_prior(share=sy.Beta(*new)))
    assert _figure(answer, "prior_widened") == pytest.approx(shape, rel=1e-9)


@pytest.mark.parametrize(
    ("old", "new", "rate_lost", "power_lost"),
    [
        (sy.Exponential(2), sy.Flat(0, np.inf), 2.0, 0.0),
        (sy.Exponential(2), sy.HalfCauchy(1), 2.0, 0.0),
        (sy.Gamma(3, 2), sy.Exponential(0.5), 1.5, 2.0),
        (sy.Gamma(3, 2), sy.LogNormal(0, 1), 2.0, -np.inf),
        (sy.Gamma(3, 2), sy.Weibull(2.0, 1.0), -np.inf, 1.0),
    ],
    ids=str,
)
def test_other_densities_are_compared_by_their_tails_as_gammas_are(
    old: Any, new: Any, rate_lost: float, power_lost: float
) -> None:
    # Gamma(A, B) draws whose prior falls like x^(s − 1) at 0 and exp(−r x) far out: what counts
    # is how much smaller s and r become, by the theorem of the test above for any such density.
    a, b = 6.0, 4.0
    x = stats.gamma(a, scale=1 / b).ppf((np.arange(N) + 0.5) / N)
    x = _matched(x, a / b, a / b**2)
    answer = sy.Fit({"rate": x}, prior={"rate": old}).reweigh(sy.swap_prior(rate=new))
    shape = max(rate_lost / b, power_lost / a)
    assert _figure(answer, "prior_widened") == pytest.approx(shape, rel=1e-9)


@pytest.mark.parametrize("new", [sy.Laplace(0, 1), sy.Logistic(1, 2), sy.Cauchy(0, 1)], ids=str)
def test_every_tail_heavier_than_normal_counts_as_flat(new: Any) -> None:
    answer = _normal_fit(0.6, sy.Normal(0, 1)).reweigh(sy.swap_prior(mu=new))
    assert _figure(answer, "prior_widened") == pytest.approx(0.36, rel=1e-9)


def test_a_tail_lighter_than_normal_is_no_widening() -> None:
    light = sy.Truncated(sy.Normal(0, 5), -20, 20)
    answer = _normal_fit(0.6, sy.Normal(0, 1)).reweigh(sy.swap_prior(mu=light))
    assert "prior_widened" not in {f.code for f in answer.verdict.findings}


@pytest.mark.parametrize("power", [0.3, 0.5, 0.8])
@pytest.mark.parametrize("prior", [sy.Flat(), sy.StudentT(3, 0, 1), None], ids=str)
def test_a_loosened_likelihood_has_the_shape_one_less_its_power_where_the_data_dominate(
    power: float, prior: Any
) -> None:
    # Weights L^(β − 1) over draws that follow L: P(w > t) ~ t^(−1/(1 − β)).
    stated = {"prior": {"mu": prior} if prior else None, "loglik": {"gauge A": -VALUES}}
    fit = sy.Fit({"mu": _standard(SEED)[:, 0]}, **stated)
    answer = fit.reweigh(sy.power(likelihood=power))
    assert _figure(answer, "likelihood_loosened") == pytest.approx(1 - power, rel=1e-12)


@pytest.mark.parametrize("power", [0.3, 0.5, 0.8])
def test_a_loosened_likelihood_under_a_normal_prior_keeps_what_the_prior_knows(
    power: float,
) -> None:
    # Posterior precision 1/V = P₀ + data: the fall is (1 − β)(1/V − P₀), the shape V times it.
    fit = _normal_fit(0.8, sy.Normal(0, 2), loglik={"gauge A": -VALUES})
    answer = fit.reweigh(sy.power(likelihood=power))
    shape = (1 - power) * (1 - 0.64 / 4)
    assert _figure(answer, "likelihood_loosened") == pytest.approx(shape, rel=1e-9)


def test_a_loosened_likelihood_and_a_widened_prior_add_up() -> None:
    fit = _normal_fit(0.8, sy.Normal(0, 2), loglik={"gauge A": -VALUES})
    change = sy.power(likelihood=0.7) & sy.swap_prior(mu=sy.Normal(0, 3))
    shape = 0.3 * (1 - 0.64 / 4) + 0.64 * (1 / 4 - 1 / 9)
    figures = [float(f.figure) for f in fit.reweigh(change).verdict.findings]
    assert any(f == pytest.approx(shape, rel=1e-9) for f in figures), figures


@pytest.mark.parametrize("factor", [1.2, 1.41, 1.42, 1.5])
def test_raised_noise_has_the_shape_one_less_the_inverse_squared_factor(factor: float) -> None:
    # L' = L/f² + constant is a likelihood to the power 1/f²: infinite variance from f = √2 on,
    # in any dimension, where the data dominate.
    fit = _normal_fit(1.0, sy.Flat(), loglik={"gauge A": -VALUES})
    answer = fit.reweigh(sy.raise_noise("gauge A", factor, sd=0.5))
    assert _figure(answer, "noise_raised") == pytest.approx(1 - 1 / factor**2, rel=1e-12)
    assert ("noise_raised" in _codes(answer)) == (factor > np.sqrt(2))


def test_a_part_of_the_likelihood_loosened_is_not_judged_by_algebra() -> None:
    loglik = {"gauge A": np.zeros((N, 2)), "gauge B": np.zeros((N, 3))}
    fit = _normal_fit(1.0, sy.Normal(0, 9), loglik=loglik)
    answer = fit.reweigh(sy.power(likelihood={"gauge A": 0.1}))
    assert "likelihood_loosened" not in {f.code for f in answer.verdict.findings}


GAPS = [
    (sy.HalfNormal(1), sy.Normal(0, 1)),
    (sy.HalfNormal(1), sy.StudentT(4, 0, 1)),
    (sy.Gamma(2, 2), sy.Flat()),
    (sy.Beta(2, 2), sy.Gamma(2, 2)),
    (sy.Flat(0, 1), sy.Flat(0, 1.01)),
    (sy.Flat(0, 1), sy.Flat(-0.01, 1)),
    (sy.Flat(0, 1), sy.HalfNormal(1)),
]
NO_GAPS = [
    (sy.Normal(0, 1), sy.HalfNormal(1)),
    (sy.Gamma(2, 2), sy.HalfNormal(1)),
    (sy.Gamma(2, 2), sy.Beta(2, 2)),
    (sy.Flat(0, 1.01), sy.Flat(0, 1)),
    (sy.Flat(), sy.Normal(0, 1)),
    (sy.Flat(0, 1), sy.Beta(1, 1)),
]


def _unit_draws() -> np.ndarray:
    return np.random.default_rng(SEED + 3).beta(3, 3, size=N)


@pytest.mark.parametrize(("old", "new"), GAPS, ids=str)
def test_a_support_that_grows_is_a_refit_whatever_the_weights_say(old: Any, new: Any) -> None:
    answer = sy.Fit({"x": _unit_draws()}, prior={"x": old}).reweigh(sy.swap_prior(x=new))
    assert answer.verdict.level == "refit"
    assert "support_gap" in _codes(answer)
    assert answer.mean("x").verdict.level == "refit"


@pytest.mark.parametrize(("old", "new"), NO_GAPS, ids=str)
def test_a_support_that_stays_or_shrinks_has_no_gap(old: Any, new: Any) -> None:
    answer = sy.Fit({"x": _unit_draws()}, prior={"x": old}).reweigh(sy.swap_prior(x=new))
    assert "support_gap" not in {f.code for f in answer.verdict.findings}


@pytest.mark.parametrize(
    ("new", "gap"),
    [(stats.norm(0, 1), True), (stats.halfnorm(), False), (stats.uniform(0, 0.5), False)],
    ids=["norm", "halfnorm", "uniform"],
)
def test_frozen_scipy_distributions_tell_their_support(new: Any, gap: bool) -> None:
    fit = sy.Fit({"x": _unit_draws()}, prior={"x": stats.gamma(2)})
    codes = {f.code for f in fit.reweigh(sy.swap_prior(x=new)).verdict.findings}
    assert ("support_gap" in codes) == gap
    assert "support_unknown" not in codes


def test_a_swap_that_agrees_on_all_draws_but_reaches_further_is_a_refit() -> None:
    # Target minus base is constant on the draws; only the supports tell.
    fit = sy.Fit({"x": _unit_draws()}, prior={"x": sy.Flat(0, 1)})
    assert fit.reweigh(sy.swap_prior(x=sy.Flat(0, 2))).verdict.level == "refit"


def test_the_support_of_a_prior_term_that_is_a_callable_is_said_to_be_unknown() -> None:
    fit = sy.Fit({"x": _unit_draws()}, prior={"x": sy.HalfNormal(1)})
    answer = fit.reweigh(sy.swap_prior(x=lambda draws: -draws["x"]))
    assert "support_unknown" in _codes(answer)
    whole = sy.Fit({"x": _unit_draws()}, prior={"x": sy.Normal(0, 1)})
    answer = whole.reweigh(sy.swap_prior(x=lambda draws: -draws["x"]))
    assert "support_unknown" not in _codes(answer)


def test_edge_pressure_is_the_base_density_at_the_moved_limit_in_base_sds() -> None:
    # Uniform draws on (0, 1): the density at 1 times the sd is 1/√12. A strip of 0.2 sd holds
    # 577 of 10,000 draws, so its relative error is 4 %; five of those. False alarm 6e-7.
    x = np.random.default_rng(SEED + 4).uniform(size=10_000)
    answer = sy.Fit({"x": x}, prior={"x": sy.Flat(0, 1)}).reweigh(sy.swap_prior(x=sy.Flat(0, 1.2)))
    assert _figure(answer, "edge_pressure") == pytest.approx(1 / np.sqrt(12), rel=0.2)


def test_draws_far_from_a_moved_limit_press_on_it_not_at_all() -> None:
    x = 5 + 0.1 * _standard(SEED + 5)[:, 0]
    answer = sy.Fit({"x": x}, prior={"x": sy.HalfNormal(9)}).reweigh(
        sy.swap_prior(x=sy.Normal(0, 9))
    )
    assert _figure(answer, "edge_pressure") == 0
    assert answer.verdict.level == "refit"


def _counts(**prior: Any) -> sy.Fit:
    k = np.random.default_rng(SEED + 3).poisson(4, size=N).astype(float)
    return sy.Fit({"k": k}, prior=prior)


@pytest.mark.parametrize("old", [sy.Poisson(4), stats.poisson(4)], ids=["ours", "scipy"])
@pytest.mark.parametrize("new", [sy.Gamma(4, 1), stats.norm(4, 2)], ids=["ours", "scipy"])
def test_counts_cannot_answer_for_a_continuum(old: Any, new: Any) -> None:
    answer = _counts(k=old).reweigh(sy.swap_prior(k=new))
    assert answer.verdict.level == "refit"
    sentence = next(r.sentence for r in answer.verdict.reasons if r.code == "support_gap")
    assert "every number from" in sentence
    assert "only whole numbers" in sentence


@pytest.mark.parametrize("new", [sy.Poisson(4), stats.poisson(4)], ids=["ours", "scipy"])
def test_a_continuum_is_not_weighed_into_counts(new: Any) -> None:
    fit = sy.Fit({"k": np.abs(_standard(SEED)[:, 0]) + 1}, prior={"k": sy.Gamma(2, 1)})
    with pytest.raises(sy.errors.ChangeError, match="of counts"):
        fit.reweigh(sy.swap_prior(k=new))


def test_counts_answer_for_other_counts() -> None:
    answer = _counts(k=sy.Poisson(4)).reweigh(sy.swap_prior(k=stats.poisson(4.2)))
    assert "support_gap" not in _codes(answer)
