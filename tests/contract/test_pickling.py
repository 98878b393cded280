"""Everything that a user holds survives a round trip through pickle, still read-only."""

from __future__ import annotations

import copy
import pickle
from collections.abc import Callable
from typing import Any

import numpy as np
import pytest

import steelyard as sy


def _arrays(held: Any, seen: set[int] | None = None) -> list[np.ndarray]:
    """All arrays that can be reached through fields, mappings and sequences."""
    seen = set() if seen is None else seen
    if id(held) in seen or isinstance(held, str | bytes | type):
        return []
    seen.add(id(held))
    if isinstance(held, np.ndarray):
        return [held]
    if isinstance(held, dict) or hasattr(held, "keys"):
        return [a for value in dict(held).values() for a in _arrays(value, seen)]
    if isinstance(held, list | tuple | set | frozenset):
        return [a for value in held for a in _arrays(value, seen)]
    return [a for value in getattr(held, "__dict__", {}).values() for a in _arrays(value, seen)]


HELD: dict[str, Callable[[sy.Fit, sy.Answer], Any]] = {
    "Fit": lambda fit, answer: fit,
    "Answer": lambda fit, answer: answer,
    "base": lambda fit, answer: fit.base,
    "Change": lambda fit, answer: answer.change,
    "Estimate": lambda fit, answer: answer.mean("rate"),
    "single Estimate": lambda fit, answer: answer.mean("mu"),
    "Decision": lambda fit, answer: answer.prob("rate > 0.1", level=0.5).decision,
    "probability": lambda fit, answer: answer.prob("rate > 9", level=0.5),
    "Verdict": lambda fit, answer: answer.verdict,
    "Verdict of an array": lambda fit, answer: answer.mean("rate").verdict,
    "Reason": lambda fit, answer: answer.verdict.reasons[0],
    "Level": lambda fit, answer: answer.verdict.level,
    "Draws": lambda fit, answer: fit.draws,
    "resampled Draws": lambda fit, answer: answer.resample(50, rng=1),
    "Table": lambda fit, answer: answer.table(),
    "Distance": lambda fit, answer: answer.distance("rate"),
    "distribution": lambda fit, answer: sy.Normal("mu", [0.1, 0.2]),
    "Smoothed": lambda fit, answer: sy.weights.smooth(np.arange(9.0)),
    "error": lambda fit, answer: sy.errors.ShapeError("draws", "(4,)", "(3,)", "Match."),
}
KIND = pytest.mark.parametrize("kind", HELD)
ROUND_TRIPS = {
    "pickle": lambda held: pickle.loads(pickle.dumps(held)),
    "old pickle": lambda held: pickle.loads(pickle.dumps(held, protocol=2)),
    "deep copy": copy.deepcopy,
    "copy": copy.copy,
}
WAY = pytest.mark.parametrize("way", ROUND_TRIPS)


@KIND
@WAY
def test_a_round_trip_keeps_the_type_and_every_array(
    fit: sy.Fit, answer: sy.Answer, kind: str, way: str
) -> None:
    held = HELD[kind](fit, answer)
    back = ROUND_TRIPS[way](held)
    assert type(back) is type(held)
    before, after = _arrays(held), _arrays(back)
    assert len(before) == len(after)
    for one, other in zip(before, after, strict=True):
        assert one.dtype == other.dtype
        assert np.array_equal(one, other, equal_nan=one.dtype.kind == "f")
    if kind not in (
        "Estimate",
        "single Estimate",
        "probability",
        "Distance",
        "Draws",
        "resampled Draws",
    ):
        assert repr(back) == repr(held)


@pytest.mark.parametrize(
    "kind",
    ["Fit", "Answer", "base", "Estimate", "Decision", "probability", "Draws", "resampled Draws"],
)
@WAY
def test_arrays_are_as_read_only_after_the_round_trip_as_before(
    fit: sy.Fit, answer: sy.Answer, kind: str, way: str
) -> None:
    back = ROUND_TRIPS[way](HELD[kind](fit, answer))
    if isinstance(back, sy.Fit):
        held = [back.draws[name] for name in back.draws] + [back.draws.starts]
    elif isinstance(back, sy.Answer):
        held = [back.weights, back.log_weights, *back.terms.values(), back.draws["mu"]]
    elif isinstance(back, sy.Draws):
        held = [*back.values(), back.starts]
    else:
        held = [a for name, a in vars(back).items() if isinstance(a, np.ndarray)]
    assert held
    for array in held:
        assert not array.flags.writeable


@WAY
def test_a_fit_answers_the_same_after_a_round_trip(
    fit: sy.Fit, answer: sy.Answer, way: str
) -> None:
    back, change = ROUND_TRIPS[way](fit), ROUND_TRIPS[way](answer.change)
    again = back.reweigh(change)
    assert again.log_weights.tobytes() == answer.log_weights.tobytes()
    assert again.table().to_csv() == answer.table().to_csv()


@WAY
def test_an_answer_goes_on_answering_after_a_round_trip(answer: sy.Answer, way: str) -> None:
    back = ROUND_TRIPS[way](answer)
    assert back.table().to_csv() == answer.table().to_csv()
    assert str(back.verdict) == str(answer.verdict)
    assert back.prob("mu > 0.1").value == answer.prob("mu > 0.1").value
    taken = back.resample(50, rng=3)
    assert np.array_equal(taken["mu"], answer.resample(50, rng=3)["mu"])


def test_a_verdict_keeps_its_reasons(answer: sy.Answer) -> None:
    verdict = answer.mean("rate").verdict
    back = pickle.loads(pickle.dumps(verdict))
    assert repr(back.reasons) == repr(verdict.reasons)
    assert back.level.tolist() == verdict.level.tolist()
    assert repr(back[3].reasons) == repr(verdict[3].reasons)


def test_levels_stay_levels() -> None:
    level = pickle.loads(pickle.dumps(sy.weigh(np.zeros(9)).verdict.level))
    assert level >= "refit"
    with pytest.raises(sy.errors.ArgumentError):
        assert level == "good"


def test_errors_keep_their_four_parts() -> None:
    told = sy.errors.ShapeError("draws", "(4,)", "(3,)", "Match.")
    back = pickle.loads(pickle.dumps(told))
    assert str(back) == str(told)
    assert (back.argument, back.expected, back.came, back.next_step) == told.args


def test_distributions_are_equal_after_a_round_trip() -> None:
    for one in (sy.Normal("mu", [0.1, 0.2]), sy.Flat(), sy.Gamma(2, 3)):
        assert pickle.loads(pickle.dumps(one)) == one


def test_answers_fits_and_changes_are_frozen(fit: sy.Fit, answer: sy.Answer) -> None:
    for held, name in (
        (answer, "change"),
        (answer, "weights"),
        (fit, "draws"),
        (answer.verdict, "level"),
    ):
        with pytest.raises(AttributeError):
            setattr(held, name, None)
