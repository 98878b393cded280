"""Conjugate targets in every kind of space, out of reach of the weights, in closed form."""

from __future__ import annotations

from collections.abc import Callable, Mapping
from dataclasses import dataclass
from typing import Any

import numpy as np
import pytest
from numpy.typing import NDArray
from scipy import special, stats

import steelyard as sy

Array = NDArray[np.float64]
Draws = Mapping[str, Array]
SEED = 20_261_213
SHAPE = (4, 1000)


@dataclass(frozen=True)
class Conjugate:
    """A base, a change of prior, and the mean, sd and log ratio of evidences of the target."""

    draws: Array
    prior: Any
    loglik: Callable[[Draws], Array]
    new: Any
    mean: Any
    sd: Any
    log_ratio: float


def _gamma() -> Conjugate:
    """Pits counted in 12 plates: Poisson with a gamma rate; the new prior thinks of 30."""
    counts = np.array([2, 4, 3, 1, 5, 2, 3, 3, 4, 2, 1, 3], dtype=float)
    total, n = counts.sum(), len(counts)

    def log_evidence(a: float, b: float) -> float:
        return float(
            a * np.log(b)
            - special.gammaln(a)
            + special.gammaln(a + total)
            - (a + total) * np.log(b + n)
        )

    draws = np.random.default_rng(SEED).gamma(2 + total, 1 / (1 + n), size=SHAPE)
    target = stats.gamma(300 + total, scale=1 / (10 + n))
    return Conjugate(
        draws,
        sy.Gamma(2, 1),
        lambda d: counts * np.log(d["p"])[:, None] - d["p"][:, None],
        sy.Gamma(300, 10),
        target.mean(),
        target.std(),
        log_evidence(300, 10) - log_evidence(2, 1),
    )


def _beta() -> Conjugate:
    """Three of 40 couplings leak; the new prior thinks of two thirds."""
    draws = np.random.default_rng(SEED).beta(4, 38, size=SHAPE)
    target = stats.beta(63, 67)
    ratio = special.betaln(63, 67) - special.betaln(60, 30)
    return Conjugate(
        draws,
        sy.Beta(1, 1),
        lambda d: 3 * np.log(d["p"]) + 37 * np.log1p(-d["p"]),
        sy.Beta(60, 30),
        target.mean(),
        target.std(),
        float(ratio - special.betaln(4, 38)),
    )


def _dirichlet() -> Conjugate:
    """Kinds of damage in 60 piles; the new prior turns them round."""
    counts = np.array([40.0, 15.0, 5.0])
    new = np.array([5.0, 30.0, 120.0])

    def log_evidence(prior: Array) -> float:
        def log_beta(a: Array) -> float:
            return float(special.gammaln(a).sum() - special.gammaln(a.sum()))

        return log_beta(prior + counts) - log_beta(prior)

    draws = np.random.default_rng(SEED).dirichlet(1 + counts, size=SHAPE)
    after = counts + new
    share = after / after.sum()
    return Conjugate(
        draws,
        sy.Dirichlet([1.0, 1.0, 1.0]),
        lambda d: (counts * np.log(d["p"])).sum(axis=1),
        sy.Dirichlet(new),
        share,
        np.sqrt(share * (1 - share) / (after.sum() + 1)),
        log_evidence(new) - log_evidence(np.ones(3)),
    )


def _normal() -> Conjugate:
    """Rates at four quays with known noise; the new prior is far and narrow."""
    readings = np.array([0.08, 0.11, 0.16, 0.09])

    def posterior(mean: float, sd: float) -> tuple[Array, float]:
        precision = 1 / 0.02**2 + 1 / sd**2
        return (readings / 0.02**2 + mean / sd**2) / precision, precision**-0.5

    def log_evidence(mean: float, sd: float) -> float:
        return float(stats.norm.logpdf(readings, mean, np.hypot(0.02, sd)).sum())

    centre, spread = posterior(0.1, 0.1)
    mean, sd = posterior(0.3, 0.01)
    return Conjugate(
        centre + spread * np.random.default_rng(SEED).normal(size=(*SHAPE, 4)),
        sy.Normal(0.1, 0.1),
        lambda d: stats.norm.logpdf(readings, d["p"], 0.02),
        sy.Normal(0.3, 0.01),
        mean,
        np.full(4, sd),
        log_evidence(0.3, 0.01) - log_evidence(0.1, 0.1),
    )


CASES = {"gamma": _gamma, "beta": _beta, "Dirichlet": _dirichlet, "normal": _normal}


@pytest.mark.parametrize("rung", [None, "tempering"])
@pytest.mark.parametrize("name", CASES)
def test_a_conjugate_target_out_of_reach_is_answered_in_closed_form(
    name: str, rung: str | None
) -> None:
    case = CASES[name]()
    fit = sy.Fit({"p": case.draws}, {"p": case.prior}, case.loglik)
    change = sy.swap_prior(p=case.new)
    assert fit.reweigh(change).verdict.level < "sound"
    answer = fit.repair(change, rungs=rung, rng=4)
    assert answer.verdict.is_sound
    for estimate, truth in (
        (answer.mean("p"), case.mean),
        (answer.sd("p"), case.sd),
        (answer.log_evidence_ratio, case.log_ratio),
    ):
        # Four reported errors: some 30 figures in 8 runs of a fixed seed.
        assert np.all(np.abs(estimate.value - truth) <= 4 * estimate.error)


def test_vectors_in_ascending_order_stay_so() -> None:
    """Order statistics of four uniforms; the target asks for larger ones."""
    rng = np.random.default_rng(SEED)
    cut = np.sort(rng.random((*SHAPE, 4)), axis=-1)
    fit = sy.Fit({"cut": cut}, {"cut": sy.Uniform(0, 1)}, lambda d: 0 * d["cut"])
    power = 30.0
    change = sy.log_ratio(lambda d: (power - 1) * np.log(d["cut"]).sum(axis=1))
    answer = fit.repair(change, ascending="cut", rng=1)
    assert answer.ladder.chosen != "smoothing"
    assert answer.verdict.is_sound
    assert (np.diff(answer.draws["cut"], axis=1) > 0).all()
    # Order statistics of four draws of a beta(30, 1).
    exact = np.sort(rng.beta(power, 1, size=(1_000_000, 4)), axis=-1)
    mean = answer.mean("cut")
    slack = exact.std(axis=0) / 1000
    assert np.all(np.abs(mean.value - exact.mean(axis=0)) <= 4 * np.hypot(mean.error, slack))


def test_correlation_matrices_move_within_their_kind() -> None:
    """A correlation of two, LKJ with shape 1, weighed by a power of its determinant."""
    matrices = sy.LKJCorrelation(1.0).sample((4000, 2, 2), rng=SEED).reshape(*SHAPE, 2, 2)
    fit = sy.Fit({"R": matrices}, {"R": sy.LKJCorrelation(1)}, lambda d: 0 * d["R"][:, 0, 0])
    change = sy.log_ratio(lambda d: 80 * np.log1p(d["R"][:, 0, 1]))
    answer = fit.repair(change, rng=1)
    # (1 + r)/2 is beta distributed with shapes 81 and 1.
    assert answer.verdict.is_sound
    for estimate, truth in (
        (answer.mean("R[0, 1]"), 2 * 81 / 82 - 1),
        (answer.mean("R[1, 0]"), 2 * 81 / 82 - 1),
        (answer.mean("R[1, 1]"), 1.0),
    ):
        assert abs(estimate.value - truth) <= 4 * estimate.error + 1e-12
