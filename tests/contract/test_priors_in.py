"""Every kind of prior term: distributions, named hyperparameters, scipy, callables, arrays.

Sums of up to fifteen log densities of size at most a hundred are compared with scipy's at 1e-10
to 1e-12: a few roundings of the largest of them.
"""

from __future__ import annotations

from typing import Any

import numpy as np
import pytest
from scipy import stats

import steelyard as sy

Draws = dict[str, np.ndarray]


def _log_prior(fit: sy.Fit, term: Any = None) -> np.ndarray:
    """Σ log π at each draw: minus the ratio of a prior of power zero."""
    power = sy.power(prior=0) if term is None else sy.power(prior={term: 0})
    terms = fit.reweigh(power, smooth=False).terms
    return -np.sum(list(terms.values()), axis=0)


def _total(density: np.ndarray) -> np.ndarray:
    return density.reshape(*density.shape[:2], -1).sum(axis=2)


def test_one_distribution_of_a_vector_is_summed_over_its_elements(draws: Draws) -> None:
    fit = sy.Fit(draws, {"rate": sy.Normal(0.1, 0.1), "loss": sy.StudentT(4, 0, 1)})
    want = _total(stats.norm(0.1, 0.1).logpdf(draws["rate"]))
    want = want + _total(stats.t(4).logpdf(draws["loss"]))
    # 1e-11: sums of fifteen terms of size ten.
    np.testing.assert_allclose(_log_prior(fit), want, atol=1e-11)


@pytest.mark.parametrize(
    "mean",
    [np.linspace(0, 0.2, 9), np.linspace(0, 0.2, 9).tolist(), tuple(np.linspace(0, 0.2, 9))],
    ids=["array", "list", "tuple"],
)
def test_hyperparameters_may_be_given_by_element(draws: Draws, mean: Any) -> None:
    fit = sy.Fit(draws, {"rate": sy.Normal(mean, 0.1)})
    want = _total(stats.norm(np.linspace(0, 0.2, 9), 0.1).logpdf(draws["rate"]))
    np.testing.assert_allclose(_log_prior(fit), want, atol=1e-11)


def test_hyperparameters_by_name_are_taken_draw_by_draw(draws: Draws) -> None:
    fit = sy.Fit(draws, {"rate": sy.Normal("mu", "tau")})
    mu, tau = draws["mu"][..., None], draws["tau"][..., None]
    want = _total(stats.norm(mu, tau).logpdf(draws["rate"]))
    np.testing.assert_allclose(_log_prior(fit), want, atol=1e-10)


def test_hyperparameters_by_name_may_be_elements_and_limits(draws: Draws) -> None:
    fit = sy.Fit(
        draws,
        {"mu": sy.Normal("rate[2]", 0.2), "tau": sy.Flat(0, "upper")},
        derived={"upper": lambda d: d["tau"] + 1.0},
    )
    want = stats.norm(draws["rate"][..., 2], 0.2).logpdf(draws["mu"]) - np.log(draws["tau"] + 1)
    np.testing.assert_allclose(_log_prior(fit), want, atol=1e-11)


def test_an_element_may_have_a_term_of_its_own(draws: Draws) -> None:
    fit = sy.Fit(
        draws,
        {"rate[3]": sy.Normal(0, 1), "loss[1, 2]": sy.Normal(0, 2), "loss[0]": sy.Normal(0, 3)},
    )
    want = stats.norm(0, 1).logpdf(draws["rate"][..., 3])
    want = want + stats.norm(0, 2).logpdf(draws["loss"][..., 1, 2])
    want = want + stats.norm(0, 3).logpdf(draws["loss"][..., 0, :]).sum(2)
    np.testing.assert_allclose(_log_prior(fit), want, atol=1e-11)


FROZEN = {
    "univariate": ("mu", stats.norm(0.1, 0.1), lambda d: stats.norm(0.1, 0.1).logpdf(d["mu"])),
    "vector": ("rate", stats.t(3), lambda d: stats.t(3).logpdf(d["rate"]).sum(2)),
    "joint": (
        ("mu", "tau"),
        stats.multivariate_normal([0.1, 0.0], [[0.1, 0.02], [0.02, 0.2]]),
        lambda d: stats.multivariate_normal([0.1, 0.0], [[0.1, 0.02], [0.02, 0.2]]).logpdf(
            np.stack([d["mu"], d["tau"]], axis=2)
        ),
    ),
}


@pytest.mark.parametrize("kind", FROZEN)
def test_frozen_scipy_distributions_are_prior_terms(draws: Draws, kind: str) -> None:
    key, term, want = FROZEN[kind]
    np.testing.assert_allclose(_log_prior(sy.Fit(draws, {key: term})), want(draws), atol=1e-11)


def test_a_frozen_discrete_distribution_is_a_prior_term() -> None:
    count = np.random.default_rng(1).poisson(4, size=(4, 50)).astype(float)
    fit = sy.Fit({"count": count}, {"count": stats.poisson(3.5)})
    np.testing.assert_allclose(_log_prior(fit), stats.poisson(3.5).logpmf(count), atol=1e-11)


CALLABLES = {
    "log densities": lambda d: -((d["mu"] - 0.1) ** 2),
    "log densities by element": lambda d: np.stack([-(d["mu"] ** 2), 0.2 * d["mu"] - 0.01], 1),
    "by chain": lambda d: -((d["mu"] - 0.1) ** 2).reshape(4, 100),
}


@pytest.mark.parametrize("kind", CALLABLES)
def test_a_callable_may_return_log_densities(draws: Draws, kind: str) -> None:
    fit = sy.Fit(draws, {"anything at all": CALLABLES[kind]})
    # 1e-12: squares of numbers below one.
    np.testing.assert_allclose(_log_prior(fit), -((draws["mu"] - 0.1) ** 2), atol=1e-12)


def test_a_callable_may_return_a_distribution(draws: Draws) -> None:
    fit = sy.Fit(draws, {"mu": lambda d: sy.Normal(0.1, 0.1)})
    np.testing.assert_allclose(
        _log_prior(fit), stats.norm(0.1, 0.1).logpdf(draws["mu"]), atol=1e-12
    )


def test_a_callable_gets_a_read_only_mapping_of_all_draws(draws: Draws) -> None:
    def term(given: Any) -> np.ndarray:
        assert set(given) == set(draws)
        assert given["rate"].shape == (400, 9)
        with pytest.raises(TypeError):
            given["mu"] = 0
        with pytest.raises(ValueError, match="read-only"):
            given["mu"][...] = 0
        return np.zeros(400)

    sy.Fit(draws, {"any": term}).reweigh(sy.power(prior=0))
    fit = sy.Fit(draws)
    fit.reweigh(sy.log_ratio(term))
    fit.base.mean(term)
    fit.base.prob(lambda d: term(d) == 0)
    sy.Fit(draws, derived={"zero": term})


@pytest.mark.parametrize("shape", [(4, 100), (400,), (4, 100, 1), (400, 1)])
def test_an_array_of_log_densities_is_a_prior_term(draws: Draws, shape: tuple[int, ...]) -> None:
    values = np.random.default_rng(2).normal(size=400)
    fit = sy.Fit(draws, {"old": values.reshape(shape)})
    assert np.array_equal(_log_prior(fit).ravel(), values)


def test_a_joint_term_counts_all_its_names(draws: Draws) -> None:
    fit = sy.Fit(draws, {("mu", "tau", "rate"): sy.Normal(0, 1)})
    parts = (draws["mu"][..., None], draws["tau"][..., None], draws["rate"])
    want = stats.norm.logpdf(np.concatenate(parts, axis=2)).sum(2)
    np.testing.assert_allclose(_log_prior(fit), want, atol=1e-11)


def test_a_flat_prior_is_stated_and_may_be_swapped(draws: Draws) -> None:
    fit = sy.Fit(draws, {"mu": sy.Flat(), "tau": sy.Flat(0)})
    answer = fit.reweigh(sy.swap_prior(mu=sy.Normal(0.1, 0.1), tau=sy.HalfNormal(0.1)))
    want = stats.norm(0.1, 0.1).logpdf(draws["mu"]) + stats.halfnorm(0, 0.1).logpdf(draws["tau"])
    np.testing.assert_allclose(sum(answer.terms.values()), want, atol=1e-11)
    assert answer.verdict.level != "refit"


@pytest.mark.parametrize("key", ["mu", ("mu",)])
def test_a_term_is_changed_by_the_key_it_was_stated_under(draws: Draws, key: Any) -> None:
    fit = sy.Fit(draws, {key: sy.Normal(0, 1), ("tau", "rate"): sy.Normal(0, 1)})
    for change in (sy.swap_prior({key: sy.Normal(0, 2)}), sy.power(prior={key: 0.5})):
        assert len(fit.reweigh(change).terms) == 1
    joint = ("tau", "rate")
    for change in (sy.swap_prior({joint: sy.Normal(0, 2)}), sy.power(prior={joint: 0.5})):
        assert len(fit.reweigh(change).terms) == 1


def test_distributions_are_equal_and_hash_alike_by_value() -> None:
    assert sy.Normal(0, 1) == sy.Normal(0.0, np.float32(1))
    assert hash(sy.Normal([0, 1], 1)) == hash(sy.Normal(np.array([0.0, 1.0]), 1))
    assert sy.Normal("mu", 1) != sy.Normal("nu", 1)
    assert len({sy.Flat(), sy.Flat(-np.inf), sy.Flat(0)}) == 2


def test_distributions_are_frozen_and_print_as_they_are_written() -> None:
    normal = sy.Normal("mu", 0.05)
    with pytest.raises(AttributeError):
        normal.mean = 3  # type: ignore[misc]
    assert str(normal) == "Normal(mu, 0.05)"
    assert str(sy.Flat()) == "Flat(-inf, inf)"
    assert str(sy.Normal([0, 1], 2)) == "Normal([0, 1], 2)"
