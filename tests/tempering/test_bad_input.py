"""Wrong arguments of temper: each says which, what was expected, and what came."""

from __future__ import annotations

import pickle
from typing import Any

import numpy as np
import pytest

import steelyard as sy
from steelyard.errors import (
    ArgumentError,
    ArgumentTypeError,
    DrawsError,
    RatioError,
    ShapeError,
    SteelyardError,
)

START = np.random.default_rng(20_261_201).normal(size=(400, 2))


def quiet(x: np.ndarray) -> np.ndarray:
    return -0.5 * (x**2).sum(axis=1)


def moved(x: np.ndarray) -> np.ndarray:
    return -0.5 * ((x - 1) ** 2).sum(axis=1)


def temper(**changed: Any) -> sy.Tempered:
    given = {"start": START, "source": quiet, "target": moved, "rng": 1, **changed}
    return sy.temper(given.pop("start"), given.pop("source"), given.pop("target"), **given)


def nan_at_three(x: np.ndarray) -> np.ndarray:
    out = quiet(x)
    out[3] = np.nan
    return out


CASES: dict[str, tuple[dict[str, Any], type[SteelyardError], str]] = {
    "one axis": (
        {"start": START[:, 0]},
        ShapeError,
        r"start: .*\(n, d\).*\(400,\).*start\[:, None",
    ),
    "three axes": ({"start": START.reshape(4, 100, 2)}, ShapeError, r"\(4, 100, 2\)"),
    "no columns": ({"start": START[:, :0]}, ShapeError, r"\(400, 0\)"),
    "no draws": ({"start": START[:0], "size": 400}, DrawsError, "none"),
    "few draws": ({"start": START[:30], "size": 400}, DrawsError, "at least 40 draws"),
    "text": ({"start": "draws.csv"}, SteelyardError, "start"),
    "an infinite draw": (
        {"start": np.where(np.arange(800).reshape(400, 2) == 7, np.inf, START)},
        DrawsError,
        "inf at point 3, column 1",
    ),
    "a sampler of too few": (
        {"start": lambda n, rng: rng.normal(size=(n - 1, 2)), "size": 400},
        ShapeError,
        "400 points; got 399",
    ),
    "weights beside a sampler": (
        {"start": lambda n, rng: rng.normal(size=(n, 2)), "start_log_weights": np.zeros(400)},
        ArgumentError,
        "sampler",
    ),
    "too few weights": ({"start_log_weights": np.zeros(3)}, ShapeError, r"\(400,\).*\(3,\)"),
    "a weight that is NaN": (
        {"start_log_weights": np.where(np.arange(400) == 5, np.nan, 0.0)},
        RatioError,
        "nan at 5",
    ),
    "weights that vanish": ({"start_log_weights": np.full(400, -np.inf)}, RatioError, "alone"),
    "no source": ({"source": None}, ArgumentTypeError, "source: .*NoneType"),
    "an array for a target": ({"target": np.zeros(400)}, ArgumentTypeError, "target: .*ndarray"),
    "a number a batch": ({"target": lambda x: -0.5}, ShapeError, r"target\(x\).*shape \(\)"),
    "a column too many": ({"source": lambda x: -0.5 * x**2}, ShapeError, r"source.*\(400, 2\)"),
    "NaN": ({"target": nan_at_three}, ArgumentError, r"target\(x\).*nan at point 3, x = \["),
    "plus infinity": ({"source": lambda x: np.full(400, np.inf)}, ArgumentError, "inf at point 0"),
    "complex": ({"target": lambda x: quiet(x) + 0j}, ArgumentTypeError, "complex"),
    "outside of the source": (
        {"source": lambda x: np.where(x[:, 0] > 2, -np.inf, quiet(x))},
        DrawsError,
        "source is −inf",
    ),
    "outside of the target": (
        {"target": lambda x: np.full(len(x), -np.inf)},
        RatioError,
        "−inf at every start point",
    ),
    "outside of the target wherever there is weight": (
        {
            "target": lambda x: np.where(x[:, 0] > 0, -np.inf, moved(x)),
            "start_log_weights": np.where(START[:, 0] > 0, 0.0, -np.inf),
        },
        RatioError,
        "start point with weight",
    ),
    "a scheme nearly right": ({"scheme": "stratifed"}, ArgumentError, "Did you mean 'stratified'"),
    "a scheme that is none": ({"scheme": 3}, ArgumentError, "scheme.*systematic"),
    "a move nearly right": ({"move": "random wak"}, ArgumentError, "Did you mean 'random walk'"),
    "a move that is none": ({"move": None}, ArgumentError, "move.*independence"),
    "Langevin without gradients": ({"move": "langevin"}, ArgumentError, "gradient.*none or one"),
    "Langevin with one": (
        {"move": "Langevin", "source_gradient": lambda x: -x},
        ArgumentError,
        "both",
    ),
    "a gradient of wrong shape": (
        {"move": "langevin", "source_gradient": quiet, "target_gradient": lambda x: 1 - x},
        ShapeError,
        r"source_gradient\(x\).*\(400, 2\).*\(400,\)",
    ),
    "a gradient that is NaN": (
        {"move": "langevin", "source_gradient": lambda x: x * np.nan, "target_gradient": quiet},
        ArgumentError,
        "finite gradients.*point 0",
    ),
    "no efficiency": ({"efficiency": 0.0}, ArgumentError, "efficiency.*0.0"),
    "all efficiency": ({"efficiency": 1}, ArgumentError, r"\(0, 1\)"),
    "efficiency in words": ({"efficiency": "high"}, ArgumentTypeError, "'high'"),
    "a negative limit": ({"most_evaluations": -5}, ArgumentError, "most_evaluations.*-5"),
    "half an evaluation": ({"most_evaluations": 0.5}, ArgumentTypeError, "0.5"),
    "a limit below the start": ({"most_evaluations": 399}, ArgumentError, "at least 400.*399"),
    "few islands": ({"islands": 9}, ArgumentError, "at least 10, or 1"),
    "one island": ({"islands": 1}, ArgumentError, "multinomial"),
    "one island, waste-free": (
        {"islands": 1, "scheme": "multinomial", "waste_free": True},
        ArgumentError,
        "waste-free",
    ),
    "no islands": ({"islands": True}, ArgumentTypeError, "islands"),
    "few particles": ({"size": 199}, ArgumentError, "from 200 particles.*199"),
    "few particles for chains": (
        {"size": 3999, "waste_free": True},
        ArgumentError,
        "from 4,000 particles.*3999",
    ),
    "negative particles": ({"size": -1}, ArgumentError, "-1"),
    "particles in words": ({"size": "many"}, ArgumentTypeError, "'many'"),
    "half a chain": ({"waste_free": 0.5}, ArgumentTypeError, "waste_free"),
    "a chain of one": ({"waste_free": 1}, ArgumentError, "from 2"),
    "one name for two": ({"names": ["rate"]}, ArgumentError, "2 different names"),
    "a name twice": ({"names": ["rate", "rate"]}, ArgumentError, "names"),
    "a text of names": ({"names": "ab"}, ArgumentTypeError, "names"),
    "an empty name": ({"names": ["rate", ""]}, ArgumentTypeError, "names"),
    "a seed that is none": ({"rng": "seven"}, ArgumentTypeError, "rng"),
    "progress of a kind": ({"progress": 3}, ArgumentTypeError, "progress"),
}


@pytest.mark.parametrize("name", CASES)
def test_a_wrong_argument_is_named_with_what_came(name: str) -> None:
    changed, kind, words = CASES[name]
    with pytest.raises(kind, match=words) as caught:
        temper(**changed)
    assert isinstance(caught.value, SteelyardError)
    assert caught.value.next_step.endswith((".", "?"))


def test_a_density_that_fails_later_still_names_the_point() -> None:
    calls = []

    def target(x: np.ndarray) -> np.ndarray:
        calls.append(len(x))
        return nan_at_three(x) if len(calls) == 4 else moved(x)

    with pytest.raises(ArgumentError, match=r"target\(x\).*nan at point 3"):
        temper(target=target)


def test_an_error_of_the_users_own_passes_as_it_is() -> None:
    def target(x: np.ndarray) -> np.ndarray:
        raise ZeroDivisionError("mine")

    with pytest.raises(ZeroDivisionError, match="mine"):
        temper(target=target)


def test_points_are_handed_out_read_only() -> None:
    def target(x: np.ndarray) -> np.ndarray:
        x -= 1
        return quiet(x)

    with pytest.raises(ValueError, match="read-only"):
        temper(target=target)


def test_a_buffer_that_is_used_again_does_no_harm() -> None:
    buffer = np.empty(400)

    def target(x: np.ndarray) -> np.ndarray:
        buffer[:] = moved(x)
        return buffer

    assert np.array_equal(temper(target=target).points, temper().points)


def test_resuming_after_a_pickle_asks_for_the_functions() -> None:
    run = pickle.loads(pickle.dumps(temper(most_evaluations=800)))
    with pytest.raises(ArgumentError, match=r"source: .*not pickled"):
        run.resume()
    with pytest.raises(ArgumentError, match=r"target: .*not pickled"):
        run.resume(quiet)
    with pytest.raises(ArgumentError, match="most_evaluations"):
        run.resume(quiet, moved, most_evaluations=0)


def test_an_answer_in_another_space_needs_a_function_that_returns_draws() -> None:
    run = temper()
    with pytest.raises(ArgumentTypeError, match="named"):
        run.answer({"x": 1})  # type: ignore[arg-type]
    with pytest.raises(SteelyardError):
        run.answer(lambda x: {"x": x[:7]})
