"""Verdicts, levels and reasons."""

from __future__ import annotations

import itertools
import operator

import numpy as np
import pytest

import steelyard as sy
from steelyard.levels import LEVELS, Level
from steelyard.rules import RULES


@pytest.fixture(scope="module")
def mixed() -> sy.Estimate:
    """Probabilities of events of many, few and hardly any draws."""
    counts = np.array([[500, 9], [2, 0]])
    shuffled = np.random.default_rng(20_261_236).permutation(1000)
    event = shuffled[:, None, None] < counts
    return sy.weigh(np.zeros(1000)).prob(event)


def test_levels_are_ordered_as_the_contract_says() -> None:
    assert LEVELS == ("refit", "strained", "sound")
    for (i, one), (j, other) in itertools.product(enumerate(LEVELS), repeat=2):
        for compare in (
            operator.lt,
            operator.le,
            operator.gt,
            operator.ge,
            operator.eq,
            operator.ne,
        ):
            want = compare(i, j)
            assert compare(Level(one), Level(other)) is want
            assert compare(Level(one), other) is want
            assert compare(one, Level(other)) is want


def test_levels_sort_and_print_like_their_names() -> None:
    levels = [Level(name) for name in ("sound", "refit", "strained")]
    assert [str(level) for level in sorted(levels)] == ["refit", "strained", "sound"]
    assert min(levels) == "refit"
    assert f"{levels[0]}" == "sound"
    assert repr(levels[0]) == "'sound'"
    assert {Level("sound"): 1}["sound"] == 1
    assert Level("sound") is not None
    assert Level("sound") != 3


def test_a_level_of_another_name_cannot_be_made() -> None:
    with pytest.raises(sy.errors.ArgumentError):
        Level("good")


def test_a_single_verdict_has_one_level(answer: sy.Answer) -> None:
    verdict = answer.verdict
    assert isinstance(verdict.level, Level)
    assert verdict.is_sound is (verdict.level == "sound")
    assert isinstance(verdict.reasons, tuple)


def test_a_verdict_of_an_array_has_an_array_of_levels(mixed: sy.Estimate) -> None:
    verdict = mixed.verdict
    assert verdict.level.shape == (2, 2)
    assert verdict.level.tolist() == [["sound", "strained"], ["refit", "refit"]]
    assert verdict.is_sound.tolist() == [[True, False], [False, False]]
    assert verdict.is_sound.dtype == np.bool_
    assert (verdict.level >= "strained").tolist() == [[True, True], [False, False]]


def test_reasons_are_built_on_indexing(mixed: sy.Estimate) -> None:
    verdict = mixed.verdict
    assert verdict[0, 0].level == "sound"
    assert [r.code for r in verdict[0, 0].reasons if r.level < "sound"] == []
    (reason,) = [r for r in verdict[0, 1].reasons if r.code == "event_draws"]
    assert reason.figure == pytest.approx(9)
    assert reason.limit == 10
    assert verdict[1].level.tolist() == ["refit", "refit"]
    assert verdict[..., 0].level.tolist() == ["sound", "refit"]
    assert verdict[-1, -1].level == "refit"
    assert verdict[np.array([True, False])].level.tolist() == [["sound", "strained"]]


def test_reasons_of_a_whole_array_are_its_worst_cases(mixed: sy.Estimate) -> None:
    found = [r for r in mixed.verdict.reasons if r.code == "event_draws"]
    assert min(r.figure for r in found) == 0
    assert found[0].level == "refit"


def test_an_index_that_is_not_there_is_an_error(mixed: sy.Estimate, answer: sy.Answer) -> None:
    with pytest.raises(IndexError):
        mixed.verdict[5]
    with pytest.raises(TypeError):
        answer.verdict[0]


def test_iterating_a_verdict_of_an_array_ends(mixed: sy.Estimate) -> None:
    assert len(list(itertools.islice(iter(mixed.verdict), 10))) == 2


def test_reasons_come_worst_first_and_notes_last() -> None:
    log_ratio = np.full(1000, -np.inf)
    log_ratio[:30] = 0.0
    verdict = sy.weigh(log_ratio, smooth=False).verdict
    ranks = [LEVELS.index(str(r.level)) for r in verdict.reasons]
    assert ranks == sorted(ranks)
    assert ranks[0] < 2
    assert ranks[-1] == 2


def test_a_reason_holds_what_the_contract_says() -> None:
    log_ratio = np.full(1000, -np.inf)
    log_ratio[:30] = 0.0
    (reason,) = [
        r for r in sy.weigh(log_ratio, smooth=False).verdict.reasons if r.code == "few_effective"
    ]
    assert reason.figure == pytest.approx(30)
    assert reason.limit == 100
    assert reason.level == "strained"
    assert "30" in reason.sentence
    assert "100" in reason.sentence
    assert reason.next_step
    with pytest.raises(AttributeError):
        reason.figure = 200  # type: ignore[misc]
    assert str(reason).startswith(reason.sentence)


def test_a_verdict_prints_its_level_and_every_reason(answer: sy.Answer) -> None:
    text = str(answer.verdict)
    assert text.splitlines()[0] == str(answer.verdict.level)
    for reason in answer.verdict.reasons:
        assert reason.sentence in text
        assert reason.next_step in text
    assert repr(answer.verdict).startswith("<Verdict ")
    assert answer.verdict._repr_html_().startswith("<")


def test_a_verdict_of_an_array_prints_counts(mixed: sy.Estimate) -> None:
    assert str(mixed.verdict).splitlines()[0] == "1 sound, 1 strained, 2 refit"


def test_every_estimate_of_a_refit_answer_is_a_refit() -> None:
    x = np.random.default_rng(1).uniform(size=(4, 100))
    fit = sy.Fit({"x": x}, {"x": sy.Flat(0, 1)})
    answer = fit.reweigh(sy.swap_prior(x=sy.Flat(0, 2)))
    assert answer.verdict.level == "refit"
    for estimate in (
        answer.mean("x"),
        answer.sd("x"),
        answer.quantile("x", 0.5),
        answer.prob("x > 0.5"),
        answer.shift("x"),
        answer.interval("x"),
        answer.distance("x").wasserstein,
        answer.divergence,
        answer.log_evidence_ratio,
        answer.covariance("x"),
    ):
        assert np.all(estimate.verdict.level == "refit")


def test_a_base_that_was_not_tested_is_a_note_and_never_a_level(fit: sy.Fit) -> None:
    assert [r.code for r in fit.base.verdict.reasons] == ["base_unverified"]
    assert fit.base.verdict.is_sound


def test_every_rule_has_sentences_and_a_source() -> None:
    for code, rule in RULES.items():
        assert code.islower()
        assert rule.sentence.endswith(".")
        assert rule.next_step.endswith(".")
        assert rule.source
        if rule.worse in ("above", "from"):
            assert rule.strained < rule.refit
        elif rule.worse == "below":
            assert rule.strained > rule.refit
