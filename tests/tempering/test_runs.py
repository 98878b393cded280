"""How a run goes: batches, seeds, stops and resumption, starts, supports."""

from __future__ import annotations

import math
import pickle
from itertools import pairwise
from typing import Any

import numpy as np
import pytest

import steelyard as sy
from steelyard.repair import temper
from steelyard.repair.islands import Islands, spread_start

from .problems import Array, Conjugate

SEED = 20_261_202
EASY = Conjugate(2, 1.5, 4.0)


def _same(one: sy.Tempered, other: sy.Tempered) -> bool:
    return (
        one.points.tobytes() == other.points.tobytes()
        and one.log_weights.tobytes() == other.log_weights.tobytes()
        and one.log_constant.value == other.log_constant.value
        and one.log_constant.error == other.log_constant.error
        and one.history == other.history
        and one.evaluations == other.evaluations
        and one.calls == other.calls
    )


def test_particles_are_a_batch() -> None:
    # 10,000 particles at more than 100 temperatures: some hundreds of calls, not 10^6.
    problem, sizes = Conjugate(1, 3.0, 10.0), []

    def target(x: Array) -> Array:
        sizes.append(len(x))
        return problem.target(x)

    run = temper(problem.start, problem.source, target, size=10_000, efficiency=0.9995, rng=SEED)
    assert len(run.history) > 100
    assert len(sizes) == run.calls < 1000
    assert set(sizes) == {10_000}
    assert run.evaluations == sum(sizes)


@pytest.mark.parametrize("move", ["mixed", "random walk", "independence"])
@pytest.mark.parametrize("scheme", ["systematic", "stratified", "residual", "multinomial"])
def test_a_seed_decides_everything_whatever_the_threads(move: str, scheme: str) -> None:
    settings = {"move": move, "scheme": scheme, "size": 400, "rng": SEED}
    with sy.threads(1):
        one = EASY.temper(**settings)
    with sy.threads(7):
        seven = EASY.temper(**settings)
    assert _same(one, seven)
    assert not _same(one, EASY.temper(**{**settings, "rng": SEED + 1}))


def test_a_generator_advances() -> None:
    rng = np.random.default_rng(SEED)
    first = EASY.temper(size=400, rng=rng)
    second = EASY.temper(size=400, rng=rng)
    assert not _same(first, second)
    assert _same(first, EASY.temper(size=400, rng=np.random.default_rng(SEED)))


class _Interrupting:
    """A target that is interrupted at one of its calls."""

    def __init__(self, at: int) -> None:
        self.calls, self.at = 0, at

    def __call__(self, x: Array) -> Array:
        self.calls += 1
        if self.calls == self.at:
            raise KeyboardInterrupt
        return EASY.target(x)


@pytest.mark.parametrize("waste_free", [False, 5])
@pytest.mark.parametrize("at", [2, 3, 5, 9, 12])
def test_an_interrupted_run_returns_what_there_is_and_resumes_bit_for_bit(
    at: int, waste_free: Any
) -> None:
    settings = {"size": 1000, "rng": SEED, "waste_free": waste_free}
    whole = EASY.temper(**settings)
    stopped = temper(EASY.start, EASY.source, _Interrupting(at), **settings)
    assert not stopped.finished
    assert stopped.stopped == "Ctrl-C"
    assert stopped.calls == at - 1
    assert stopped.verdict.level <= "strained"
    assert "tempering_unfinished" in [r.code for r in stopped.verdict.reasons]
    assert "resume()" in str(stopped)
    assert len(stopped.log_weights) == len(stopped.points) == stopped.draws.size
    assert math.isfinite(stopped.answer().mean("x[0]").value)
    assert _same(stopped.resume(), whole)


def test_an_interruption_before_anything_is_there_is_passed_on() -> None:
    with pytest.raises(KeyboardInterrupt):
        temper(EASY.start, EASY.source, _Interrupting(1), size=400, rng=SEED)


@pytest.mark.parametrize("move", ["mixed", "langevin"])
def test_no_more_is_evaluated_than_allowed_and_the_rest_can_follow(move: str) -> None:
    gradients = {
        "source_gradient": EASY.source_gradient,
        "target_gradient": EASY.target_gradient,
    }
    settings = {"size": 400, "rng": SEED, "move": move, **gradients}
    whole = EASY.temper(**settings)
    part = EASY.temper(most_evaluations=2750, **settings)
    assert part.evaluations <= 2750 < part.evaluations + 800
    assert part.stopped == "most_evaluations"
    assert 0 < part.temperature <= 1
    further = part.resume(most_evaluations=3200)
    assert further.evaluations <= 3200
    assert _same(further.resume(), whole)
    assert whole.resume() is whole


def test_a_stopped_run_is_weighed_the_rest_of_the_way() -> None:
    # A run that stops early is importance sampling from where it stands: its answer holds, within
    # 4 errors (false alarm 1e-4), as long as its weights are sound.
    problem = Conjugate(2, 0.7, 2.0)
    run = problem.temper(size=4000, rng=SEED, efficiency=0.95, most_evaluations=16_000)
    assert 0 < run.temperature < 1
    mean = run.answer().mean("x[0]")
    assert abs(mean.value - problem.moments(1.0)[0]) < 4 * mean.error
    constant = run.log_constant
    assert abs(constant.value - problem.log_constant) < 4 * constant.error


def test_a_pickled_run_goes_on_with_its_functions() -> None:
    part = EASY.temper(size=400, rng=SEED, most_evaluations=2000)
    back = pickle.loads(pickle.dumps(part))
    assert _same(back, part)
    assert not back.points.flags.writeable
    assert _same(back.resume(EASY.source, EASY.target), EASY.temper(size=400, rng=SEED))


def test_progress_is_told_after_every_batch(capsys: pytest.CaptureFixture[str]) -> None:
    told: list[tuple[float, int]] = []
    run = EASY.temper(size=400, rng=SEED, progress=lambda t, n: told.append((t, n)))
    assert told[-1] == (1.0, run.evaluations)
    assert all(a <= b for (a, _), (b, _) in pairwise(told))
    EASY.temper(size=400, rng=SEED, progress=True)
    assert capsys.readouterr().err.endswith(f"temperature 1, {run.evaluations:,} evaluations\n")


def test_every_start_draw_counts_once_however_many_particles() -> None:
    generator = np.random.default_rng(SEED)
    weights = generator.normal(size=103)
    islands = Islands(10, 25, "systematic")
    for given in (None, weights):
        rows, logs = spread_start(103, given, islands, generator)
        held = np.zeros(103)
        np.add.at(held, rows, np.exp(logs))
        expected = np.full(103, 1.0) if given is None else np.exp(given)
        # Exact but for rounding, within a block; blocks of 10 and of 11 draws alike.
        np.testing.assert_allclose(held, expected / expected.sum(), rtol=1e-12)
        assert (np.diff(rows) >= 0).all()
        assert len({*rows.reshape(10, 25)[0]} & {*rows.reshape(10, 25)[1]}) == 0


def test_weighted_start_draws_stand_for_the_source() -> None:
    # Draws of N(0, 1.5²) weighed to N(0, 1); 4 errors, false alarm 1e-4 each.
    x = np.random.default_rng(SEED).normal(0, 1.5, size=(4000, 2))
    weights = (-0.5 * x**2 + 0.5 * (x / 1.5) ** 2).sum(axis=1)
    run = EASY.temper(start=x, start_log_weights=weights, rng=SEED)
    constant, mean = run.log_constant, run.answer().mean("x[0]")
    assert abs(constant.value - EASY.log_constant) < 4 * constant.error
    assert abs(mean.value - EASY.moments(1.0)[0]) < 4 * mean.error


def test_existing_draws_and_a_sampler_lead_to_the_same_place() -> None:
    draws = np.random.default_rng(SEED).normal(size=(1500, 2))
    run = EASY.temper(start=draws, rng=SEED)
    assert len(run.points) == 1500
    assert EASY.temper(start=draws, size=4000, rng=SEED).points.shape == (4000, 2)
    assert len(EASY.temper(rng=SEED).points) == 4000
    mean = run.answer().mean("x[1]")
    assert abs(mean.value - EASY.moments(1.0)[0]) < 4 * mean.error


def test_names_and_other_spaces() -> None:
    run = EASY.temper(size=400, rng=SEED, names=["log rate", "log wear"])
    assert list(run.draws) == ["log rate", "log wear"]
    assert run.draws.chains == run.islands == 20
    answer = run.answer(lambda x: {"rate": np.exp(x[:, 0]), "both": x})
    assert answer.mean("both").value.shape == (2,)
    assert np.array_equal(answer.draws["rate"], np.exp(run.points[:, 0]))


def test_a_support_that_shrinks_is_met_exactly() -> None:
    # N(0, 1) cut at 1: the constant is log P(x > 1) = log 0.158655; 4 errors, false alarm 1e-4.
    def target(x: Array) -> Array:
        return np.where(x[:, 0] > 1, -0.5 * x[:, 0] ** 2, -np.inf)

    run = temper(
        lambda n, rng: rng.normal(size=(n, 1)), lambda x: -0.5 * x[:, 0] ** 2, target, rng=SEED
    )
    assert (run.points > 1).all()
    constant = run.log_constant
    assert abs(constant.value - math.log(0.15865525393145707)) < 4 * constant.error
    # E[x | x > 1] = φ(1)/P(x > 1).
    mean = run.answer().mean("x[0]")
    assert abs(mean.value - 1.525135276160981) < 4 * mean.error


def test_a_target_beyond_the_source_is_a_refit() -> None:
    def source(x: Array) -> Array:
        return np.where(x[:, 0] < 1, -0.5 * x[:, 0] ** 2, -np.inf)

    def start(n: int, rng: np.random.Generator) -> Array:
        x = rng.normal(size=(8 * n, 1))
        return x[x[:, 0] < 1][:n]

    run = temper(start, source, lambda x: -0.5 * x[:, 0] ** 2, rng=SEED)
    assert run.verdict.level == "refit"
    assert run.verdict.reasons[0].code == "beyond_source"
    assert run.log_constant.verdict.level == "refit"
    assert run.answer().mean("x[0]").verdict.level == "refit"


def test_a_target_equal_to_the_source_costs_little_and_says_nothing_new() -> None:
    run = temper(EASY.start, EASY.source, EASY.source, size=400, rng=SEED)
    assert len(run.history) == 1
    assert abs(run.log_constant.value) < 1e-12
    assert run.log_constant.error < 1e-12
    assert run.verdict.is_sound


def test_a_waste_free_run_keeps_every_state() -> None:
    run = EASY.temper(size=2000, waste_free=10, rng=SEED)
    assert len(run.points) == 2000
    assert {step.sweeps for step in run.history} == {9}
    assert {step.evaluations for step in run.history} == {1800}
    # Rounded up to whole chains in every island.
    assert len(EASY.temper(size=2010, waste_free=10, rng=SEED).points) == 2200


def test_texts_tables_and_frames() -> None:
    run = EASY.temper(size=400, rng=SEED)
    table = run.table()
    assert table["temperature"][-1] == 1.0
    assert sum(table["log ratio"]) == pytest.approx(run.log_constant.value, abs=1e-12)
    assert sum(table["evaluations"]) + 400 == run.evaluations
    assert "400 draws in 20 islands" in str(run)
    assert repr(run).startswith("<Tempered ")
    assert run._repr_html_().count("<table>") == 1


def test_the_plot_draws_the_history() -> None:
    pyplot = pytest.importorskip("matplotlib.pyplot")
    for run in (
        EASY.temper(size=400, rng=SEED),
        EASY.temper(size=400, rng=SEED, most_evaluations=2000),
        EASY.temper(size=400, rng=SEED, most_evaluations=400),
    ):
        ax = run.plot()
        drawn = {line.get_color(): line for line in ax.get_lines()}
        assert len(drawn) >= 1
        if run.history:
            values = [s.effective_size / len(run.points) for s in run.history]
            assert any(list(line.get_ydata()) == values for line in ax.get_lines())
        pyplot.close(ax.figure)
