"""Every reason that a verdict can have: a case that calls for it and a case just inside the limit.

The builders of cases are in `reason_cases`.
"""

from __future__ import annotations

from collections.abc import Callable

import numpy as np
import pytest

import steelyard as sy
from steelyard.rules import RULES

from . import twins
from .pool_cases import contradicting, linked
from .reason_cases import (
    SEED,
    N,
    apart,
    beyond,
    both,
    carried,
    equal,
    event,
    excursions,
    few,
    heavy,
    left_behind,
    left_out,
    loosened,
    noise,
    noisier,
    own_effects,
    prior,
    product,
    quantile,
    repaired,
    shape,
    shares,
    sided,
    stacked,
    stopped,
    stranded,
    tempered,
    widened,
)

# Limits that are ours and may move; the others are held to METHODS below.
FEW, BEYOND = RULES["few_effective_draws"], RULES["draws_beyond"]
Judged = sy.Answer | sy.Estimate | sy.LeaveOut | sy.Tempered


Case = tuple[str, Callable[[], Judged], Callable[[], Judged]]
STRAINED: list[Case] = [
    ("weight_shape", lambda: shape(0.85), lambda: shape(0.65)),
    ("quantity_shape", lambda: product(1.3), lambda: product(0.9)),
    ("few_contributions", lambda: carried(1), lambda: carried(3)),
    ("few_effective", lambda: equal(99), lambda: equal(100)),
    ("few_effective_entropy", lambda: equal(49), lambda: equal(51)),
    ("few_effective_draws", lambda: few(FEW.strained - 1), lambda: few(FEW.strained + 1)),
    ("few_carry", lambda: heavy(0.1001), lambda: heavy(0.0999)),
    ("saturated_divergence", lambda: equal(15), lambda: equal(16)),
    ("autocorrelated_tail", lambda: excursions(9), lambda: excursions(10)),
    ("event_draws", lambda: event(9), lambda: event(11)),
    ("event_draws", lambda: event(N - 9), lambda: event(N - 11)),
    ("draws_beyond", lambda: beyond(BEYOND.strained - 1), lambda: beyond(BEYOND.strained + 1)),
    (
        "draws_beyond",
        lambda: beyond(N - BEYOND.strained + 2),
        lambda: beyond(N - BEYOND.strained),
    ),
    ("prior_widened", lambda: widened(0.51), lambda: widened(0.49)),
    ("likelihood_loosened", lambda: loosened(0.5), lambda: loosened(0.51)),
    (
        "likelihood_loosened",
        lambda: both(0.51),
        lambda: both(0.49),
    ),
    ("groups_strained", lambda: left_out(0.85), lambda: left_out(0.4)),
    ("own_latents", lambda: own_effects(0.55), lambda: own_effects(0.45)),
    ("mass_behind", lambda: left_behind(10.5), lambda: left_behind(9.5)),
    (
        "tail_beyond",
        lambda: repaired("moment matching", df=5),
        lambda: repaired("moment matching", df=30),
    ),
    ("noise_raised", lambda: noisier(1.42), lambda: noisier(1.41)),
    (
        "step_shape",
        lambda: tempered(tail_shape=0.71).log_constant,
        lambda: tempered(tail_shape=0.69).log_constant,
    ),
    ("few_islands", lambda: stranded(7), lambda: stranded(8)),
    ("constant_spread", lambda: stranded(7).log_constant, lambda: stranded(8).log_constant),
    ("sides_disagree", lambda: sided(-1.01), lambda: sided(0.99)),
    ("moves_stuck", lambda: tempered(jump=0.29), lambda: tempered(jump=0.31)),
    ("tempering_unfinished", lambda: stopped(1), lambda: stopped(None)),
    ("pool_overlap", lambda: linked(5.2), lambda: linked(4.8)),
    ("pool_contradiction", lambda: contradicting(0.25), lambda: contradicting(0.15)),
]
REFIT: list[Case] = [
    ("mass_behind", lambda: left_behind(100.5), lambda: left_behind(99.5)),
    ("groups_refit", lambda: left_out(1.15), lambda: left_out(0.4)),
    ("weight_shape", lambda: shape(1.15), lambda: shape(0.9)),
    ("few_effective", lambda: equal(24), lambda: equal(25)),
    ("few_effective_entropy", lambda: equal(19), lambda: equal(21)),
    ("few_effective_draws", lambda: few(FEW.refit - 1), lambda: few(FEW.refit + 1)),
    ("few_carry", lambda: heavy(0.3001), lambda: heavy(0.2999)),
    ("saturated_divergence", lambda: equal(5), lambda: equal(6)),
    ("autocorrelated_tail", lambda: excursions(2), lambda: excursions(3)),
    ("event_draws", lambda: event(2), lambda: event(4)),
    ("draws_beyond", lambda: beyond(BEYOND.refit - 1), lambda: beyond(BEYOND.refit + 1)),
    ("chains_disagree", lambda: apart(0.6), lambda: apart(0.2)),
    ("chain_share", lambda: shares(0.5), lambda: shares(0.07)),
    ("quantile_reach", lambda: quantile(0.0004), lambda: quantile(0.005)),
    (
        "support_gap",
        lambda: prior(sy.Flat(0, 1), sy.Flat(0, 1.1)),
        lambda: prior(sy.Flat(0, 1.1), sy.Flat(0, 1)),
    ),
    ("prior_widened", lambda: widened(1.01), lambda: widened(0.99)),
    ("likelihood_loosened", lambda: both(1.01), lambda: loosened(0.0)),
    (
        "step_shape",
        lambda: tempered(tail_shape=1.01).log_constant,
        lambda: tempered(tail_shape=0.99).log_constant,
    ),
    ("few_islands", lambda: stranded(3), lambda: stranded(4)),
    ("constant_spread", lambda: stranded(1).log_constant, lambda: stranded(2).log_constant),
    ("sides_disagree", lambda: sided(3.01), lambda: sided(2.99)),
    ("moves_stuck", lambda: tempered(jump=0.029), lambda: tempered(jump=0.031)),
    ("beyond_source", lambda: tempered(beyond=1), lambda: tempered(beyond=0)),
    ("pool_overlap", lambda: linked(6.0), lambda: linked(5.6)),
    ("pool_contradiction", lambda: contradicting(0.35), lambda: contradicting(0.25)),
]
NOTES: list[Case] = [
    (
        "rows_independent",
        lambda: left_out(0.4),
        lambda: left_out(0.4, conditional=np.zeros((4000, 3))),
    ),
    ("groups_sampled", lambda: left_out(0.4, sample=2, rng=1), lambda: left_out(0.4)),
    ("refits_folded", lambda: left_out(0.4).with_refits({0: -1.0}), lambda: left_out(0.4)),
    (
        "edge_pressure",
        lambda: prior(sy.Flat(0, 1), sy.Flat(0, 1.1)),
        lambda: prior(sy.Flat(0, 1.1), sy.Flat(0, 1)),
    ),
    (
        "draws_moved",
        lambda: repaired("moment matching"),
        lambda: repaired("smoothing"),
    ),
    ("draws_lost", lambda: equal(999), lambda: sy.weigh(np.zeros(N))),
    ("support_unknown", lambda: sy.weigh(np.zeros(N)), lambda: stacked(7).base),
    (
        "no_change",
        lambda: stacked(8).reweigh(sy.swap_prior(x=sy.Normal(0.0, 9.0))),
        lambda: stacked(8).reweigh(sy.swap_prior(x=sy.Normal(0, 9.0001))),
    ),
    ("base_unverified", lambda: stacked(9).base, lambda: sy.weigh(np.zeros(N))),
]


def _level(judged: Judged, code: str) -> str | None:
    levels = [str(r.level) for r in judged.verdict.reasons if r.code == code]
    return min(levels, key=("refit", "strained", "sound").index) if levels else None


def test_every_rule_has_a_case_here() -> None:
    assert {case[0] for case in [*STRAINED, *REFIT, *NOTES]} == set(RULES)


def test_limits_are_those_of_the_methods() -> None:
    stated = {
        "weight_shape": (0.7, 1.0),
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
            f for f in equal(draws // 2, draws).verdict.findings if f.code == "weight_shape"
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
    answer = heavy(0.15)
    assert answer.verdict.level == "strained"
    for estimate in (answer.mean(noise(12, N)), answer.prob(noise(13, N) > 0)):
        assert estimate.verdict.level <= answer.verdict.level
