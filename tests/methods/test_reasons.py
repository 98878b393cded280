"""Every reason that a verdict can have: a case that calls for it and a case just inside the limit.

Weights are built so that the judged figure is known exactly: `m` draws of equal weight among `n`
have effective size m in both forms, largest share 1/m and divergence log(n/m).
"""

from __future__ import annotations

from collections.abc import Callable

import numpy as np
import pytest

import steelyard as sy
from steelyard.rules import RULES

from . import twins

SEED = 20_261_216
N = 1000
# Limits that are ours and may move; the others are held to METHODS below.
FEW, BEYOND = RULES["few_effective_draws"], RULES["draws_beyond"]
Judged = sy.Answer | sy.Estimate


def _equal(count: int, draws: int = N) -> sy.Answer:
    """`count` draws of equal weight, spread evenly over all; the others have none."""
    log_ratio = np.full(draws, -np.inf)
    log_ratio[np.linspace(0, draws - 1, count).astype(int)] = 0.0
    return sy.weigh(log_ratio, smooth=False)


def _heavy(share: float) -> sy.Answer:
    """One draw with this share, the others equal."""
    log_ratio = np.zeros(N)
    log_ratio[77] = np.log(share / (1 - share) * (N - 1))
    return sy.weigh(log_ratio, smooth=False)


def _shape(shape: float) -> sy.Answer:
    """Weights with that Pareto tail at evenly spaced probabilities, in random order.

    METHODS' shrinkage takes k to (M k + 5)/(M + 10) with M = 190 of 4,000 draws: the shapes asked
    for keep at least 0.05 of distance from a limit.
    """
    u = (np.arange(4000) + 0.5) / 4000
    log_ratio = -shape * np.log(np.random.default_rng(SEED).permutation(u))
    return sy.weigh(log_ratio, smooth=False)


def _noise(seed: int, *shape: int) -> np.ndarray:
    return np.random.default_rng(SEED + seed).normal(size=shape)


def _apart(distance: float) -> sy.Estimate:
    """Mean of four chains of independent noise, one of which sits apart."""
    x = _noise(1, 4, 500)
    x -= x.mean(axis=1, keepdims=True)
    x[3] += distance
    return sy.weigh(np.zeros(x.shape)).mean(x)


def _shares(tilt: float) -> sy.Answer:
    """Four chains, the last of which holds exp(tilt) times the weight of another."""
    log_ratio = 0.3 * _noise(2, 4, 500)
    log_ratio -= np.log(np.exp(log_ratio).mean(axis=1, keepdims=True))
    log_ratio[3] += tilt
    return sy.weigh(log_ratio, smooth=False)


def _unordered(draws: int = N) -> sy.Answer:
    """Draws without order, each of which is worth one."""
    return sy.Fit({"x": _noise(15, draws)}, ordered=False).base


def _few(draws: float) -> sy.Estimate:
    return _unordered(int(draws)).mean("x")


def _event(inside: int) -> sy.Estimate:
    return _unordered().prob(np.arange(N) < inside)


def _excursions(count: int) -> sy.Answer:
    """The heavy fifth of one chain of 2,000 stands in `count` stretches, far apart."""
    log_ratio = 0.01 * _noise(14, 2000)
    length = 420 // count + 1
    for start in np.linspace(0, 2000 - length, count).astype(int):
        log_ratio[start : start + length] += 3.0
    return sy.weigh(log_ratio, smooth=False)


def _quantile(p: float) -> sy.Estimate:
    return _unordered().quantile("x", p)


def _beyond(draws: float) -> sy.Estimate:
    """A quantile with so many of the 1,000 draws at or below it."""
    return _quantile((draws - 0.5) / N)


def _product(power: float) -> sy.Estimate:
    """Mean of a quantity with a Pareto tail of that shape, under equal weights."""
    u = (np.arange(4000) + 0.5) / 4000
    x = np.random.default_rng(SEED + 4).permutation(u) ** -power
    return sy.weigh(np.zeros(4000)).mean(x)


def _prior(old: sy.Normal | sy.Flat, new: object) -> sy.Answer:
    x = np.random.default_rng(SEED + 5).uniform(size=N)
    return sy.Fit({"x": x}, prior={"x": old}).reweigh(sy.swap_prior(x=new))


def _loosened(power: float) -> sy.Answer:
    """A flat prior: the data dominate, and the shape is one less the power."""
    loglik = {"gauge A": np.full((N, 2), -1.0) + 0.01 * _noise(17, N, 2)}
    fit = sy.Fit({"x": _noise(6, N)}, {"x": sy.Flat()}, loglik)
    return fit.reweigh(sy.power(likelihood=power))


def _both(shape: float) -> sy.Answer:
    """Normal throughout: ``λ(1 − V P₀) + V P₀`` for a prior widened to a flat one, λ = 0.1."""
    x = _noise(18, N)
    variance = (shape - 0.1) / 0.9
    x = (x - x.mean()) / x.std(ddof=1) * np.sqrt(variance)
    fit = sy.Fit({"x": x}, {"x": sy.Normal(0, 1)}, {"gauge A": np.full((N, 2), -1.0)})
    return fit.reweigh(sy.power(likelihood=0.9) & sy.swap_prior(x=sy.Flat()))


def _noisier(factor: float) -> sy.Answer:
    fit = sy.Fit({"x": _noise(16, N)}, loglik={"gauge A": np.full((N, 2), -1.0)})
    return fit.reweigh(sy.raise_noise("gauge A", factor, sd=1.0))


def _stacked(seed: int) -> sy.Fit:
    return sy.Fit({"x": _noise(seed, N)}, prior={"x": sy.Normal(0, 9)})


Case = tuple[str, Callable[[], Judged], Callable[[], Judged]]
STRAINED: list[Case] = [
    ("weight_shape", lambda: _shape(0.85), lambda: _shape(0.65)),
    ("quantity_shape", lambda: _product(0.85), lambda: _product(0.65)),
    ("few_effective", lambda: _equal(99), lambda: _equal(100)),
    ("few_effective_entropy", lambda: _equal(49), lambda: _equal(51)),
    ("few_effective_draws", lambda: _few(FEW.strained - 1), lambda: _few(FEW.strained + 1)),
    ("few_carry", lambda: _heavy(0.1001), lambda: _heavy(0.0999)),
    ("saturated_divergence", lambda: _equal(15), lambda: _equal(16)),
    ("autocorrelated_tail", lambda: _excursions(9), lambda: _excursions(10)),
    ("event_draws", lambda: _event(9), lambda: _event(11)),
    ("event_draws", lambda: _event(N - 9), lambda: _event(N - 11)),
    ("draws_beyond", lambda: _beyond(BEYOND.strained - 1), lambda: _beyond(BEYOND.strained + 1)),
    (
        "draws_beyond",
        lambda: _beyond(N - BEYOND.strained + 2),
        lambda: _beyond(N - BEYOND.strained),
    ),
    ("prior_widened", lambda: _widened(0.51), lambda: _widened(0.49)),
    ("likelihood_loosened", lambda: _loosened(0.5), lambda: _loosened(0.51)),
    (
        "likelihood_loosened",
        lambda: _both(0.51),
        lambda: _both(0.49),
    ),
    ("noise_raised", lambda: _noisier(1.42), lambda: _noisier(1.41)),
]
REFIT: list[Case] = [
    ("weight_shape", lambda: _shape(1.15), lambda: _shape(0.9)),
    ("quantity_shape", lambda: _product(1.3), lambda: _product(0.9)),
    ("few_effective", lambda: _equal(24), lambda: _equal(25)),
    ("few_effective_entropy", lambda: _equal(19), lambda: _equal(21)),
    ("few_effective_draws", lambda: _few(FEW.refit - 1), lambda: _few(FEW.refit + 1)),
    ("few_carry", lambda: _heavy(0.3001), lambda: _heavy(0.2999)),
    ("saturated_divergence", lambda: _equal(5), lambda: _equal(6)),
    ("autocorrelated_tail", lambda: _excursions(2), lambda: _excursions(3)),
    ("event_draws", lambda: _event(2), lambda: _event(4)),
    ("draws_beyond", lambda: _beyond(BEYOND.refit - 1), lambda: _beyond(BEYOND.refit + 1)),
    ("chains_disagree", lambda: _apart(0.6), lambda: _apart(0.2)),
    ("chain_share", lambda: _shares(0.5), lambda: _shares(0.07)),
    ("quantile_reach", lambda: _quantile(0.0004), lambda: _quantile(0.005)),
    (
        "support_gap",
        lambda: _prior(sy.Flat(0, 1), sy.Flat(0, 1.1)),
        lambda: _prior(sy.Flat(0, 1.1), sy.Flat(0, 1)),
    ),
    ("prior_widened", lambda: _widened(1.01), lambda: _widened(0.99)),
    ("likelihood_loosened", lambda: _both(1.01), lambda: _loosened(0.0)),
]
NOTES: list[Case] = [
    (
        "edge_pressure",
        lambda: _prior(sy.Flat(0, 1), sy.Flat(0, 1.1)),
        lambda: _prior(sy.Flat(0, 1.1), sy.Flat(0, 1)),
    ),
    ("draws_lost", lambda: _equal(999), lambda: sy.weigh(np.zeros(N))),
    ("support_unknown", lambda: sy.weigh(np.zeros(N)), lambda: _stacked(7).base),
    (
        "no_change",
        lambda: _stacked(8).reweigh(sy.swap_prior(x=sy.Normal(0.0, 9.0))),
        lambda: _stacked(8).reweigh(sy.swap_prior(x=sy.Normal(0, 9.0001))),
    ),
    ("base_unverified", lambda: _stacked(9).base, lambda: sy.weigh(np.zeros(N))),
]


def _widened(shape: float) -> sy.Answer:
    x = _noise(10, N)
    x = (x - x.mean()) / x.std(ddof=1) * np.sqrt(shape)
    fit = sy.Fit({"x": x}, prior={"x": sy.Normal(0, 1)})
    return fit.reweigh(sy.swap_prior(x=sy.Flat()))


def _level(judged: Judged, code: str) -> str | None:
    levels = [str(r.level) for r in judged.verdict.reasons if r.code == code]
    return min(levels, key=("refit", "strained", "sound").index) if levels else None


def test_every_rule_has_a_case_here() -> None:
    assert {case[0] for case in [*STRAINED, *REFIT, *NOTES]} == set(RULES)


def test_limits_are_those_of_the_methods() -> None:
    stated = {
        "weight_shape": (0.7, 1.0),
        "quantity_shape": (0.7, 1.0),
        "few_effective": (100, 25),
        "few_effective_entropy": (50, 20),
        "few_carry": (0.1, 0.3),
        "chains_disagree": (1e-3, 1e-6),
        "chain_share": (1e-3, 1e-6),
        "event_draws": (10, 3),
        "prior_widened": (0.5, 1.0),
        "likelihood_loosened": (0.5, 1.0),
        "noise_raised": (0.5, 1.0),
    }
    assert {code: (RULES[code].strained, RULES[code].refit) for code in stated} == stated


def _ids(case: object) -> str:
    return case if isinstance(case, str) else ""


@pytest.mark.parametrize(("code", "beyond", "inside"), STRAINED, ids=_ids)
def test_a_figure_beyond_its_first_limit_is_strained_and_one_inside_is_silent(
    code: str, beyond: Callable[[], Judged], inside: Callable[[], Judged]
) -> None:
    assert _level(beyond(), code) == "strained"
    assert _level(inside(), code) is None


@pytest.mark.parametrize(("code", "beyond", "inside"), REFIT, ids=_ids)
def test_a_figure_beyond_its_second_limit_is_a_refit_and_one_inside_is_not(
    code: str, beyond: Callable[[], Judged], inside: Callable[[], Judged]
) -> None:
    assert _level(beyond(), code) == "refit"
    assert _level(inside(), code) != "refit"


@pytest.mark.parametrize(("code", "speaking", "silent"), NOTES, ids=_ids)
def test_a_note_stands_in_the_reasons_and_leaves_the_level_alone(
    code: str, speaking: Callable[[], Judged], silent: Callable[[], Judged]
) -> None:
    answer = speaking()
    assert _level(answer, code) == "sound"
    assert _level(silent(), code) is None
    others = [r.level for r in answer.verdict.reasons if r.code != code]
    assert answer.verdict.level == min(
        others, key=("refit", "strained", "sound").index, default="sound"
    )


@pytest.mark.parametrize(
    ("code", "beyond"), [(c, b) for c, b, _ in [*STRAINED, *REFIT, *NOTES]], ids=_ids
)
def test_a_reason_says_its_figure_and_a_next_step(code: str, beyond: Callable[[], Judged]) -> None:
    reason = next(r for r in beyond().verdict.reasons if r.code == code)
    assert "{" not in reason.sentence + reason.next_step
    assert reason.sentence.endswith(".")
    assert reason.next_step.endswith(".")
    judged = RULES[code].worse not in ("always", "note")
    assert judged == np.isfinite(reason.limit)


def test_the_limit_of_the_weights_shape_falls_with_the_number_of_draws() -> None:
    # min(1 − 1/log10 S, 0.7): 0.5 at 100 draws, 0.7 from 2,155 on.
    for draws, limit in ((100, 0.5), (1000, 2 / 3), (4000, 0.7)):
        (finding,) = [
            f for f in _equal(draws // 2, draws).verdict.findings if f.code == "weight_shape"
        ]
        assert finding.strained == pytest.approx(limit, rel=1e-12)


def test_draws_that_a_reason_asks_for_follow_the_published_formula() -> None:
    # 10^(1/(1 − k)): 1,000 for 2/3.
    from steelyard.levels import needed_draws

    assert needed_draws(2 / 3) == pytest.approx(1000, rel=1e-12)
    assert needed_draws(-3) == 10
    assert needed_draws(1) == np.inf


def test_chain_disagreement_is_calibrated_on_chains_that_agree() -> None:
    # 300 sets of 4 AR(0.5) chains of 400: strained below p = 1e-3 in truth; up to 4 of 300 pass
    # as noise of that rate (binomial, false alarm 3e-4), 12 would mean a test ten times too eager.
    rng = np.random.default_rng(SEED + 11)
    spoken = 0
    for _ in range(300):
        x = twins.autoregression(rng, 0.5, 4, 400)
        spoken += _level(sy.weigh(np.zeros(x.shape)).mean(x), "chains_disagree") is not None
    assert spoken <= 4


def test_the_level_of_an_estimate_is_never_better_than_that_of_its_answer() -> None:
    answer = _heavy(0.15)
    assert answer.verdict.level == "strained"
    for estimate in (answer.mean(_noise(12, N)), answer.prob(_noise(13, N) > 0)):
        assert estimate.verdict.level <= answer.verdict.level
