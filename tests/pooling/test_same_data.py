"""Several fits of the same data: constants, answers and their errors against exact values."""

from __future__ import annotations

import pickle

import numpy as np
import pytest

import steelyard as sy

from .models import READING, chains, fitted, log_constant, pooled, posterior

SEED = 20_261_207
SDS, DRAWS, CORRELATIONS = (0.5, 1.0, 2.0), (200, 600, 300), (0.0, 0.8, 0.5)


@pytest.fixture(scope="module")
def pool() -> sy.Pool:
    return pooled(np.random.default_rng(SEED), SDS, DRAWS, CORRELATIONS)


def test_intervals_of_pooled_estimates_cover() -> None:
    """
    80 pools, seven estimates each, 95 % Monte Carlo intervals.

    At least 85 % of each estimate's must cover: with a true coverage of 95 % that fails once in
    2,000 (binomial), for one of seven once in 300, and the seed is fixed. Of all 560 at least 91 %.
    """
    hits = []
    for repeat in range(80):
        rng = np.random.default_rng([SEED, repeat])
        found = pooled(rng, SDS, DRAWS, CORRELATIONS)
        wide = found.reweigh(sy.swap_prior(mu=sy.Normal(0, 3.0)))
        mean, sd = posterior(3.0)
        base = posterior(SDS[0])[0]
        first = log_constant(SDS[0])
        exact = [
            (found.base.mean("mu"), base),
            (wide.mean("mu"), mean),
            (wide.sd("mu"), sd),
            (wide.shift("mu"), mean - base),
            (wide.log_evidence_ratio, log_constant(3.0) - first),
        ]
        row = [low <= value <= high for e, value in exact for low, high in [e.error_interval()]]
        low, high = found.log_constants.error_interval()
        row += [low[k] <= log_constant(SDS[k]) - first <= high[k] for k in (1, 2)]
        hits.append(row)
    covered = np.mean(hits, axis=0)
    assert covered.min() >= 0.85, covered
    assert covered.mean() >= 0.91, covered


def test_errors_tell_what_they_should_be(pool: sy.Pool) -> None:
    """
    Of independent draws the constants have the variance of Meng and Wong's two-sample formula.

    1/10 for the ratio of errors: the share of overlap is itself estimated from 8,000 draws.
    """
    rng = np.random.default_rng(SEED)
    fits = [
        sy.Fit({"x": rng.normal(centre, sd, 4000)}, {"x": sy.Normal(centre, sd)}, ordered=False)
        for centre, sd in ((0.0, 1.0), (1.0, 0.5))
    ]
    found = sy.pool(fits, data="same", common="likelihood")
    # P8.1: asymptotic variance times the number of draws.
    assert found.log_constants.error[1] == pytest.approx((2.3717961 / 8000) ** 0.5, rel=0.1)
    assert abs(found.log_constants.value[1]) < 4 * found.log_constants.error[1]
    variance = np.diag(pool.covariance)
    assert np.allclose(variance, pool.log_constants.error**2, rtol=1e-6)
    # Both are measured against the same first fit.
    assert pool.covariance[1, 2] > 0


def test_a_pool_answers_more_surely_than_its_best_fit() -> None:
    rng = np.random.default_rng(SEED)
    fits = [fitted(rng, sd, 500) for sd in (0.5, 2.0)]
    change = sy.swap_prior(mu=sy.Normal(0, 1.0))
    base = sy.pool(fits, data="same", common="gauge A").reweigh(change)
    alone = fits[1].reweigh(change)
    assert base.mean("mu").error < alone.mean("mu").error
    assert base.effective_size > alone.effective_size


def test_autocorrelated_draws_count_by_their_effective_size(pool: sy.Pool) -> None:
    # AR(0.8): a mean is worth a ninth of the draws, a square more (AR(0.64): 0.22).
    share = pool.effective_sizes / [4 * n for n in DRAWS]
    assert share[0] > 0.8
    assert 0.08 < share[1] < 0.3
    assert share[1] < share[2] < share[0]


def test_two_fits_of_the_same_posterior_are_one_long_fit() -> None:
    rng = np.random.default_rng(SEED)
    mu = 0.5 + 0.7 * rng.normal(size=(8, 250))
    prior = {"mu": sy.Normal(0, 1)}
    halves = [sy.Fit({"mu": part}, prior, ordered=False) for part in (mu[:4], mu[4:])]
    whole = sy.Fit({"mu": mu}, prior, ordered=False)
    found = sy.pool(halves, data="same", common="likelihood")
    change = sy.swap_prior(mu=sy.Normal(0.2, 0.9))
    one, two = found.reweigh(change).mean("mu"), whole.reweigh(change).mean("mu")
    assert one.value == pytest.approx(two.value, rel=1e-12)
    # The errors differ by the degree of freedom that each half gives for its own mean.
    assert one.error == pytest.approx(two.error, rel=5e-3)
    assert np.allclose(found.log_constants.value, 0, atol=1e-12)


def test_known_constants_leave_the_mixture_and_no_error() -> None:
    rng = np.random.default_rng(SEED)
    fits = [fitted(rng, sd) for sd in SDS]
    exact = [log_constant(sd) for sd in SDS]
    found = sy.pool(fits, data="same", common="gauge A", log_constants=exact)
    assert np.allclose(found.log_constants.value, np.subtract(exact, exact[0]), atol=1e-12)
    assert (found.log_constants.error == 0).all()
    assert found.base.verdict.is_sound
    wrong = sy.pool(fits, data="same", common="gauge A", log_constants=[0, 0.8, 0.2])
    assert "pool_contradiction" in [r.code for r in wrong.base.verdict.reasons]


def test_callable_likelihoods_need_nothing_in_common() -> None:
    rng = np.random.default_rng(SEED)

    def normal(draws: dict[str, np.ndarray]) -> np.ndarray:
        return -0.5 * (READING - draws["mu"][:, None]) ** 2

    def heavy(draws: dict[str, np.ndarray]) -> np.ndarray:
        return -2.5 * np.log1p((READING - draws["mu"][:, None]) ** 2 / 4)

    mean, sd = posterior(1.0)
    prior = {"mu": sy.Normal(0, 1)}
    one = sy.Fit({"mu": mean + sd * rng.normal(size=(4, 1000))}, prior, {"A": normal})
    # The Student-t posterior, resampled from normal draws by exact weights.
    wide = mean + 2 * sd * rng.normal(size=400_000)
    log_w = -0.5 * wide**2 + heavy({"mu": wide})[:, 0] + 0.5 * ((wide - mean) / (2 * sd)) ** 2
    w = np.exp(log_w - log_w.max())
    draws = rng.choice(wide, 4000, replace=False, p=w / w.sum())
    other = sy.Fit({"mu": draws}, prior, {"A": heavy}, ordered=False)
    found = sy.pool([one, other], data="same")
    grid = np.linspace(-8, 8, 4001)
    z = [np.exp(-0.5 * grid**2 + f({"mu": grid})[:, 0]).sum() for f in (normal, heavy)]
    assert found.base.verdict.is_sound
    off = found.log_constants.value[1] - np.log(z[1] / z[0])
    assert abs(off) < 4 * found.log_constants.error[1]
    # The likelihood travels with the pool: the reading can be dropped.
    without = found.reweigh(sy.drop([0])).mean("mu")
    assert abs(without.value) < 4 * without.error


def test_supports_are_judged_against_all_fits() -> None:
    rng = np.random.default_rng(SEED)
    positive = np.abs(rng.normal(size=(4, 500)))
    half = sy.Fit({"x": positive}, {"x": sy.HalfNormal(1.0)})
    whole = sy.Fit({"x": rng.normal(size=(4, 500))}, {"x": sy.Normal(0, 1.0)})
    change = sy.swap_prior(x=sy.Normal(0, 0.9))
    assert "support_gap" in [r.code for r in half.reweigh(change).verdict.reasons]
    found = sy.pool([half, whole], data="same", common="likelihood").reweigh(change)
    assert found.verdict.is_sound
    answer = found.mean("x")
    assert abs(answer.value) < 4 * answer.error
    # Two pieces cover what neither does, three fifths do not.
    pieces = [
        sy.Fit({"x": rng.uniform(low, low + 3, (4, 500))}, {"x": sy.Uniform(low, low + 3)})
        for low in (0, 2)
    ]
    both = sy.pool(pieces, data="same", common="likelihood")
    for upper, gap in ((5, False), (6, True)):
        reasons = both.reweigh(sy.swap_prior(x=sy.Uniform(0, upper))).verdict.reasons
        assert ("support_gap" in [r.code for r in reasons]) is gap


def test_a_wide_fit_carries_what_a_narrow_one_cannot() -> None:
    """Algebra condemns widening from the narrow fit alone, not from the pool."""
    rng = np.random.default_rng(SEED)
    fits = [fitted(rng, sd, 1000) for sd in (0.3, 3.0)]
    change = sy.swap_prior(mu=sy.Normal(0, 2.5))
    assert not fits[0].reweigh(change).verdict.is_sound
    found = sy.pool(fits, data="same", common="gauge A").reweigh(change)
    assert found.verdict.is_sound
    assert abs(found.mean("mu").value - posterior(2.5)[0]) < 4 * found.mean("mu").error


def test_the_fit_that_contradicts_is_named() -> None:
    rng = np.random.default_rng(SEED)
    fits = {f"crew {sd}": fitted(rng, sd, 1000) for sd in (0.7, 1.0)}
    fits["crew 3"] = fitted(rng, 1.5, 1000, shift=0.25)
    reasons = sy.pool(fits, data="same", common="gauge A").base.verdict.reasons
    named = [r for r in reasons if r.code == "pool_contradiction"]
    assert len(named) == 1
    assert "crew 3 contradict" in named[0].sentence


def test_sound_fits_are_seldom_said_to_contradict() -> None:
    """100 pools of sound fits: p below 1e-3 more than 2 times has probability 1.5e-4."""
    named = 0
    for repeat in range(100):
        rng = np.random.default_rng([SEED, 1, repeat])
        found = pooled(rng, (0.7, 1.0, 1.5), (100, 200, 150), (0.0, 0.7, 0.4))
        named += "pool_contradiction" in [r.code for r in found.base.verdict.reasons]
    assert named <= 2


def test_a_fit_out_of_reach_is_named_and_its_constant_not_known() -> None:
    rng = np.random.default_rng(SEED)
    fits = [fitted(rng, 1.0), fitted(rng, 1.5)]
    far = sy.Fit(
        {"mu": 40 + 0.1 * rng.normal(size=(4, 500))},
        {"mu": sy.Normal(40, 0.1)},
        {"gauge A": np.zeros((4, 500, 1))},
    )
    found = sy.pool([*fits, far], data="same", common="gauge A")
    assert found.log_constants.error[2] == np.inf
    reasons = [r for r in found.base.verdict.reasons if r.code == "pool_overlap"]
    assert len(reasons) == 1
    assert "fit 3" in reasons[0].sentence
    assert found.base.verdict.level == "refit"


def test_weighted_draws_keep_their_weights() -> None:
    rng = np.random.default_rng(SEED)
    mean, sd = posterior(1.0)
    wide = mean + 1.5 * sd * rng.normal(size=4000)
    given = 0.5 * ((wide - mean) / (1.5 * sd)) ** 2 - 0.5 * ((wide - mean) / sd) ** 2
    weighted = sy.Fit({"mu": wide}, {"mu": sy.Normal(0, 1)}, log_weights=given, ordered=False)
    mu = posterior(2.0)[0] + posterior(2.0)[1] * chains(rng, (4, 500), 0.3)
    other = sy.Fit({"mu": mu}, {"mu": sy.Normal(0, 2)})
    found = sy.pool([weighted, other], data="same", common="likelihood")
    off = found.log_constants.value[1] - log_constant(2.0) + log_constant(1.0)
    assert abs(off) < 4 * found.log_constants.error[1]
    assert abs(found.base.mean("mu").value - mean) < 4 * found.base.mean("mu").error


def test_every_verb_of_a_fit_runs_on_a_pool(pool: sy.Pool) -> None:
    family = [0.6, 1.0, 2.5]
    sweep = pool.sweep(lambda s: sy.swap_prior(mu=sy.Normal(0, s)), family, "mu")
    exact = np.array([posterior(sd)[0] for sd in family])
    values, errors = (sweep.value["mu"], sweep.error["mu"])
    assert (np.abs(np.asarray(values) - exact) < 4 * np.asarray(errors)).all()
    triage = pool.triage({"wide": sy.swap_prior(mu=sy.Normal(0, 2))}, "mu")
    found = triage.value["mu"]
    assert abs(found.value[0] - posterior(2.0)[0]) < 4 * found.error[0]
    # Derivative of the posterior mean in the prior mean: its precision over the whole.
    local = pool.local("mu").derivative["mu"]["mean"]
    slope = (1 / SDS[0] ** 2) / (1 + 1 / SDS[0] ** 2)
    assert abs(np.ravel(local.value)[0] - slope) < 4 * np.ravel(local.error)[0]
    assert pool.pull("mu").table()
    assert pool.resistance("mu > 0", 0.5).value > 1
    assert pool.worst_case("mu", divergence=0.01).lower.value < pool.base.mean("mu").value
    assert len(pool.check()) % 3 == 0
    drawn = pool.base.resample(100, rng=1)
    assert drawn.size == 100
    assert drawn.pooling is None


def test_a_pool_prints_pickles_and_plots(pool: sy.Pool) -> None:
    again = pickle.loads(pickle.dumps(pool))
    assert str(again) == str(pool)
    assert "<table>" in pool._repr_html_()
    assert repr(pool).startswith("<Pool of 3 fits, 4400 draws>")
    assert np.allclose(pool.shared_mass.sum(axis=1), 1, atol=1e-9)
    pytest.importorskip("matplotlib").use("Agg")
    assert len(pool.plot().patches) == 9
    assert pool.plot.constants().get_xlabel().endswith("fit 1")


def test_threads_leave_every_bit_alone() -> None:
    answers = []
    for threads in (1, 7):
        with sy.threads(threads):
            found = pooled(np.random.default_rng(SEED), SDS, DRAWS, CORRELATIONS)
            answers.append(found.table().to_csv() + found.base.table().to_csv())
    assert answers[0] == answers[1]
