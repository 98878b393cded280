"""Resampled draws: order, chains, reproducibility."""

from __future__ import annotations

import numpy as np
import pytest

import steelyard as sy

METHODS = ("systematic", "stratified", "residual", "multinomial", "without_replacement")
METHOD = pytest.mark.parametrize("method", METHODS)


@METHOD
def test_resampled_draws_stand_in_the_order_of_the_base(answer: sy.Answer, method: str) -> None:
    taken = answer.resample(150, method, rng=1)  # type: ignore[arg-type]
    base = answer.draws
    assert isinstance(taken, sy.Draws)
    assert taken.size == 150
    assert list(taken) == list(base)
    place = {value: i for i, value in enumerate(base["mu"].tolist())}
    rows = np.array([place[value] for value in taken["mu"].tolist()])
    assert np.all(np.diff(rows) >= 0)
    for name in base:
        assert np.array_equal(taken[name], base[name][rows])
    assert np.array_equal(np.array(taken.chain_names)[taken.chain], base.chain[rows])


@METHOD
def test_the_same_seed_gives_the_same_draws_and_another_seed_others(
    answer: sy.Answer, method: str
) -> None:
    def taken(rng: object) -> bytes:
        return answer.resample(100, method, rng=rng)["mu"].tobytes()  # type: ignore[arg-type]

    assert taken(7) == taken(7)
    assert taken(7) == taken(np.random.default_rng(7))
    assert taken(7) == taken(np.random.SeedSequence(7))
    assert len({taken(seed) for seed in range(20)}) > 10


def test_a_generator_advances_and_can_be_replayed(answer: sy.Answer) -> None:
    rng = np.random.default_rng(3)
    one, other = (answer.resample(100, rng=rng)["mu"].tobytes() for _ in range(2))
    assert one != other
    rng = np.random.default_rng(3)
    assert [answer.resample(100, rng=rng)["mu"].tobytes() for _ in range(2)] == [one, other]


def test_without_a_seed_two_calls_differ(answer: sy.Answer) -> None:
    # Systematic resampling of 400 draws has 2^53 starting points; that ten calls agree by chance
    # needs weights which the start does not move, and these move.
    assert len({answer.resample(100)["mu"].tobytes() for _ in range(10)}) > 1


def test_numpy_s_global_state_is_neither_used_nor_moved(answer: sy.Answer) -> None:
    np.random.seed(1)  # noqa: NPY002
    before = np.random.get_state()[1].tobytes()  # type: ignore[index]  # noqa: NPY002
    answer.resample(100)
    answer.interval("mu", kind="shortest")
    assert np.random.get_state()[1].tobytes() == before  # type: ignore[index]  # noqa: NPY002


def test_resampled_draws_are_the_positions_that_the_weights_function_gives(
    answer: sy.Answer,
) -> None:
    rows = sy.weights.resample(answer.log_weights.ravel(), 100, rng=11)
    assert np.array_equal(answer.resample(100, rng=11)["rate"], answer.draws["rate"][rows])


def test_resampled_draws_serve_as_the_draws_of_a_fit(answer: sy.Answer) -> None:
    taken = answer.resample(300, rng=5)
    fit = sy.Fit(taken, {"mu": sy.Normal(0.1, 0.1)}, ordered=False)
    assert fit.base.mean("mu").value == pytest.approx(taken["mu"].mean(), abs=1e-14)
    # Systematic resampling adds less than a third of the Monte Carlo error here; five of it.
    gap = abs(taken["rate"].mean(axis=0) - answer.mean("rate").value)
    assert np.all(gap < 5 * answer.mean("rate").error)


def test_resampled_draws_become_a_dataset_with_the_chain_of_each(answer: sy.Answer) -> None:
    data = answer.resample(50, rng=2).to_xarray()
    assert data["mu"].dims == ("draw",)
    assert data["rate"].shape == (50, 9)
    assert data["chain"].dims == ("draw",)
    assert set(np.unique(data["chain"].values)) <= {0, 1, 2, 3}


def test_chains_keep_their_names_when_one_is_left_without_draws() -> None:
    x = np.random.default_rng(4).normal(size=60)
    fit = sy.Fit({"x": x}, chain=np.repeat(["a", "b", "c"], 20))
    only = np.where(np.arange(60) < 20, -np.inf, 0.0)
    taken = fit.reweigh(sy.log_ratio(only)).resample(30, rng=1)
    assert taken.chain_names == ("b", "c")
    assert set(taken.to_xarray()["chain"].values.tolist()) == {"b", "c"}


def test_draws_with_a_chain_axis_become_a_dataset_with_one(fit: sy.Fit) -> None:
    data = fit.draws.to_xarray()
    assert data["mu"].dims == ("chain", "draw")
    assert np.array_equal(data["mu"].values.ravel(), fit.draws["mu"])
    again = sy.Fit(data).draws
    assert all(np.array_equal(again[name], fit.draws[name]) for name in fit.draws)


def test_an_answer_without_draws_resamples_positions_only() -> None:
    taken = sy.weigh(np.zeros(10)).resample(4, rng=1)
    assert (taken.size, len(taken)) == (4, 0)
