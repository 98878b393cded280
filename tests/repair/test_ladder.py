"""The ladder: rungs in order of price, limits, what is told, and answers that can be asked."""

from __future__ import annotations

import copy
import pickle
from collections.abc import Mapping
from typing import Any

import numpy as np
import pytest
from numpy.typing import NDArray

import steelyard as sy
from steelyard.errors import (
    ArgumentError,
    ArgumentTypeError,
    ChangeError,
    LikelihoodError,
    QuantityError,
    UnknownNameError,
)

Array = NDArray[np.float64]
Draws = Mapping[str, Array]
SEED = 20_261_211


def gauge(d: Draws) -> Array:
    return np.asarray(-0.5 * ((d["rate"] - 0.10) / 0.02) ** 2)


def moved(d: Draws) -> Array:
    return np.asarray(-0.5 * ((d["rate"] - 0.20) / 0.03) ** 2)


def heavy(d: Draws) -> Array:
    """A Student-t of three degrees, out of reach, with tails that no map of normal draws has."""
    return np.asarray(-2.0 * np.log1p(((d["rate"] - 0.20) / 0.03) ** 2 / 3))


def near(d: Draws) -> Array:
    return np.asarray(-0.5 * ((d["rate"] - 0.105) / 0.02) ** 2)


def _fit(count: int = 500, **more: Any) -> sy.Fit:
    rate = np.random.default_rng(SEED).normal(0.10, 0.02, size=(4, count))
    return sy.Fit({"rate": rate}, {"rate": sy.Flat()}, gauge, **more)


MOVED, HEAVY, NEAR = (sy.swap_loglik(f) for f in (moved, heavy, near))


def test_the_first_sound_rung_is_the_last_one_tried() -> None:
    assert [r.name for r in _fit().repair(NEAR).ladder] == ["smoothing"]
    assert [r.name for r in _fit().repair(MOVED).ladder] == ["smoothing", "moment matching"]
    answer = _fit(1000).repair(HEAVY, rng=1)
    assert [r.name for r in answer.ladder] == ["smoothing", "moment matching", "tempering"]
    assert answer.ladder.chosen == "tempering"
    assert answer.verdict.is_sound
    mean = answer.mean("rate")
    assert abs(mean.value - 0.20) <= 4 * mean.error


def test_prices_add_up_and_rise() -> None:
    calls: list[int] = []

    def counted(d: Draws) -> Array:
        calls.append(len(d["rate"]))
        return heavy(d)

    fit = _fit()
    change = sy.swap_loglik(counted)
    calls[:] = []
    ladder = fit.repair(change, rng=1).ladder
    # One call for the shape of its values in each merge of the change; these are no points.
    assert sum(n for n in calls if n > 1) == ladder.evaluations
    assert len(calls) < 200
    cost = [rung.evaluations for rung in ladder]
    assert cost == sorted(cost)
    assert all(rung.seconds >= 0 for rung in ladder)


@pytest.mark.parametrize("limit", [1, 1000, 5000, 20_000, 60_000])
def test_a_limit_in_evaluations_is_kept(limit: int) -> None:
    ladder = _fit().repair(HEAVY, most_evaluations=limit, rng=1).ladder
    assert ladder.evaluations - ladder["smoothing"].evaluations <= limit
    if limit < 60_000:
        assert "limit" in ladder.rungs[-1].stopped


def test_a_limit_in_seconds_is_kept() -> None:
    ladder = _fit().repair(HEAVY, most_seconds=1e-6, rng=1).ladder
    assert ladder.evaluations == ladder["smoothing"].evaluations
    assert "limit" in ladder.rungs[-1].stopped


def test_no_rung_returns_worse_weights_than_the_one_before() -> None:
    plain = _fit().reweigh(NEAR)
    answer = _fit().repair(NEAR, rungs=["moment matching", "tempering"], rng=1)
    assert answer.verdict.is_sound
    assert answer.effective_size >= plain.effective_size
    # Too few evaluations for any rung: the plain answer, with what it is worth.
    answer = _fit().repair(HEAVY, most_evaluations=10)
    np.testing.assert_array_equal(answer.weights, _fit().reweigh(HEAVY).weights)
    assert answer.verdict.level == "refit"


def test_rungs_may_be_named_and_repeat_bit_for_bit() -> None:
    for rung in ("moment matching", "tempering"):
        one, two = (_fit().repair(MOVED, rungs=rung, rng=7) for _ in range(2))
        assert one.ladder.chosen == rung
        np.testing.assert_array_equal(one.draws["rate"], two.draws["rate"])
        np.testing.assert_array_equal(one.weights, two.weights)
    other = _fit().repair(MOVED, rungs="tempering", rng=8)
    assert not np.array_equal(other.draws["rate"], two.draws["rate"])


def test_threads_change_no_bit() -> None:
    for rung in ("moment matching", "tempering"):
        found = []
        for count in (1, 7):
            with sy.threads(count):
                answer = _fit().repair(MOVED, rungs=rung, rng=7)
            found.append((answer.weights, answer.mean("rate").error))
        np.testing.assert_array_equal(found[0][0], found[1][0])
        assert found[0][1] == found[1][1]


@pytest.mark.parametrize("rung", ["moment matching", "tempering"])
def test_an_answer_from_new_draws_can_be_asked_everything(rung: str) -> None:
    answer = _fit(1000).repair(MOVED, rungs=rung, rng=3)
    exact = {
        "mean": (answer.mean("rate"), 0.20),
        "sd": (answer.sd("rate"), 0.03),
        "quantile": (answer.quantile("rate", 0.05), 0.20 - 1.644853627 * 0.03),
        "interval": (answer.interval("rate", 0.9), 0.20 + np.array([-1, 1]) * 1.644853627 * 0.03),
        "prob": (answer.prob("rate > 0.23"), 0.15865525393),
        "prob of a callable": (answer.prob(lambda d: d["rate"] > 0.23), 0.15865525393),
        "shift": (answer.shift("rate"), 0.10),
        "shift of sd": (answer.shift("rate", of="sd"), 0.01),
        "shift of a quantile": (answer.shift("rate", of=("quantile", 0.5)), 0.10),
        "shift of an event": (answer.shift("rate > 0.15"), 0.95220965 - 0.00620967),
        "covariance": (answer.covariance("rate"), np.array([[0.0009]])),
        "divergence": (answer.divergence, 0.5 * (2.25 + 25 - 1 - 2 * np.log(1.5))),
        "log ratio": (answer.log_evidence_ratio, np.log(1.5)),
        "distance": (answer.distance("rate").wasserstein, 5.0),
    }
    # Four reported errors; the paired errors of the shift are smaller than those of its parts.
    for name, (estimate, truth) in exact.items():
        assert np.all(np.abs(estimate.value - truth) <= 4 * estimate.error), name
    table = answer.table()
    assert table["level"] == ("sound",)
    assert answer.resample(200, rng=1)["rate"].shape == (200,)
    assert answer.weights.shape == answer.draws.chain.shape or answer.weights.ndim == 2
    assert answer.terms == {}
    assert "draws_moved" in {r.code for r in answer.verdict.reasons}
    assert str(answer.mean("rate").verdict.level) == "sound"


def test_the_shift_of_mapped_draws_is_paired_and_that_of_tempered_ones_is_not() -> None:
    paired = _fit(1000).repair(MOVED, rungs="moment matching").shift("rate").error
    apart = _fit(1000).repair(MOVED, rungs="tempering", rng=1).shift("rate").error
    both = np.hypot(0.02, 0.03) / np.sqrt(4000)
    assert paired < 0.5 * both
    # Errors of 4,000 draws are themselves known to a few per cent, those of islands to a sixth.
    assert apart == pytest.approx(both, rel=0.6)


def test_arrays_of_the_old_draws_are_refused() -> None:
    fit = _fit()
    answer = fit.repair(MOVED)
    for ask in (answer.mean, answer.shift):
        with pytest.raises(QuantityError, match="the draws have moved"):
            ask(fit.draws["rate"])
    with pytest.raises(QuantityError, match="the draws have moved"):
        answer.prob(fit.draws["rate"] > 0.1)
    with pytest.raises(ChangeError, match="draws that moved"):
        answer.attribute("rate")


def test_derived_quantities_move_along_and_stored_ones_are_gone() -> None:
    rate = np.random.default_rng(SEED).normal(0.10, 0.02, size=(4, 500))
    fit = sy.Fit(
        {"rate": rate, "stored": rate * 2},
        {"rate": sy.Flat()},
        gauge,
        derived=["stored"],
    )
    answer = fit.repair(MOVED)
    assert "stored" not in answer.draws
    with pytest.raises(UnknownNameError, match="stored"):
        answer.mean("stored")
    computed = _fit(derived={"loss": lambda d: 10 * d["rate"]}).repair(MOVED)
    assert computed.mean("loss").value == pytest.approx(10 * computed.mean("rate").value)


def test_quantities_that_have_to_be_sound_keep_the_ladder_going() -> None:
    answer = _fit().repair(NEAR, quantities=["rate > 0.21"], rng=1)
    assert len(answer.ladder) > 1
    with pytest.raises(UnknownNameError):
        _fit().repair(NEAR, quantities="wall")


def test_progress_is_told(capsys: pytest.CaptureFixture[str]) -> None:
    told: list[tuple[int, str]] = []
    _fit().repair(HEAVY, rng=1, progress=lambda points, rung: told.append((points, rung)))
    points = [p for p, _ in told]
    assert points == sorted(points)
    assert {rung for _, rung in told} >= {"moment matching", "tempering"}
    _fit().repair(MOVED, progress=True)
    assert "moment matching" in capsys.readouterr().err


def test_ctrl_c_returns_the_best_answer_so_far() -> None:
    calls = [0]

    def interrupted(d: Draws) -> Array:
        calls[0] += len(d["rate"]) > 1
        if calls[0] > 4:
            raise KeyboardInterrupt
        return heavy(d)

    answer = _fit().repair(sy.swap_loglik(interrupted), rng=1)
    assert answer.ladder.rungs[-1].stopped == "stopped by Ctrl-C"
    assert answer.verdict.level < "sound"


def test_what_bars_a_rung_is_told_or_an_error_where_it_was_named() -> None:
    rate = np.random.default_rng(SEED).normal(0.10, 0.02, size=(4, 500))
    fit = sy.Fit({"rate": rate}, {"rate": sy.Flat()}, gauge({"rate": rate}))
    ladder = fit.repair(MOVED).ladder
    assert [r.name for r in ladder] == ["smoothing", "moment matching", "tempering"]
    assert "loglik['likelihood'] is an array" in ladder["tempering"].stopped
    assert ladder.chosen == "smoothing"
    for rung in ("moment matching", "tempering"):
        with pytest.raises(LikelihoodError, match="a callable"):
            fit.repair(MOVED, rungs=[rung])
    with pytest.raises(ChangeError, match="collapse"):
        _fit().repair(MOVED, rungs="collapse")


BAD: dict[str, tuple[dict[str, Any], type[Exception], str]] = {
    "an unknown rung": ({"rungs": ["smooting"]}, ArgumentError, "smoothing"),
    "no rung": ({"rungs": []}, ArgumentError, "at least one"),
    "a rung twice": ({"rungs": ["smoothing", "smoothing"]}, ArgumentError, "once"),
    "a number as rungs": ({"rungs": 3}, ArgumentTypeError, "rungs"),
    "no evaluations": ({"most_evaluations": 0}, ArgumentError, "most_evaluations"),
    "NaN seconds": ({"most_seconds": float("nan")}, ArgumentError, "most_seconds"),
    "a text as limit": ({"most_evaluations": "many"}, ArgumentTypeError, "most_evaluations"),
    "True as limit": ({"most_seconds": True}, ArgumentTypeError, "most_seconds"),
    "a text as progress": ({"progress": "yes"}, ArgumentTypeError, "progress"),
    "a text as rng": ({"rng": "1"}, ArgumentTypeError, "rng"),
    "an unknown ascending name": ({"ascending": "wall"}, UnknownNameError, "ascending"),
    "a number as fits": ({"fits": 3}, ArgumentTypeError, "fits"),
    "a number as ascending": ({"ascending": 3}, ArgumentTypeError, "ascending"),
    "fits that are none": ({"fits": [3], "rungs": "pooling"}, ArgumentTypeError, "fits"),
}


@pytest.mark.parametrize("name", BAD)
def test_an_unusable_argument_is_an_error_that_names_it(name: str) -> None:
    arguments, error, said = BAD[name]
    rungs = {"rungs": ["moment matching"]} if name.startswith("an unknown asc") else {}
    with pytest.raises(error, match=said):
        _fit().repair(MOVED, **{**rungs, **arguments})


def test_a_ladder_prints_plots_tabulates_and_survives_a_pickle() -> None:
    answer = _fit().repair(MOVED)
    ladder = answer.ladder
    text = str(ladder)
    for word in ("moment matching", "evaluations", "tail shape", "sound"):
        assert word in text
        assert word in ladder._repr_html_()
    assert str(ladder) in str(answer)
    assert ladder.table()["rung"] == ("smoothing", "moment matching")
    assert ladder["smoothing"].level == "refit"
    with pytest.raises(UnknownNameError, match="smoothing"):
        _ = ladder["cellar"]
    for twin in (pickle.loads(pickle.dumps(ladder)), copy.deepcopy(ladder)):
        assert twin.table().columns == ladder.table().columns
    again = pickle.loads(pickle.dumps(answer.mean("rate")))
    assert again.value == answer.mean("rate").value


def test_the_plot_shows_every_rung() -> None:
    pyplot = pytest.importorskip("matplotlib.pyplot")
    ladder = _fit().repair(MOVED).ladder
    ax = ladder.plot()
    assert [t.get_text() for t in ax.get_yticklabels()] == ["smoothing", "moment matching"]
    assert len(ax.patches) == 2
    pyplot.close("all")


def test_a_target_beyond_the_support_of_the_base_is_reached_from_its_own_prior() -> None:
    """Half-normal to normal: no weight can do it, and no map."""
    readings = np.random.default_rng(3).normal(-0.05, 0.3, size=12)
    rng = np.random.default_rng(SEED)

    def loglik(d: Draws) -> Array:
        return np.asarray(-0.5 * ((readings - d["bias"][:, None]) / 0.3) ** 2)

    precision = 12 / 0.09 + 1 / 0.15**2
    mean = readings.sum() / 0.09 / precision
    # The base posterior is the normal one cut off at 0.
    whole = rng.normal(mean, precision**-0.5, size=40_000)
    bias = whole[whole > 0][:4000].reshape(4, 1000)
    fit = sy.Fit({"bias": bias}, {"bias": sy.HalfNormal(0.15)}, loglik)
    answer = fit.repair(sy.swap_prior(bias=sy.Normal(0, 0.15)), rng=2)
    assert [r.name for r in answer.ladder] == ["smoothing", "moment matching", "tempering"]
    assert answer.ladder["moment matching"].evaluations == 0
    assert answer.verdict.is_sound
    for estimate, truth in (
        (answer.mean("bias"), mean),
        (answer.sd("bias"), precision**-0.5),
        (answer.shift("bias"), mean - bias.mean()),
    ):
        assert estimate.verdict.is_sound
        assert abs(estimate.value - truth) <= 4 * estimate.error
    with pytest.raises(ChangeError, match="log_evidence_ratio"):
        _ = answer.log_evidence_ratio
    # A flat prior cannot be drawn from.
    change = sy.swap_prior(bias=sy.Flat())
    assert "not possible" in fit.repair(change).ladder["tempering"].stopped


def test_other_fits_of_the_same_data_are_pooled() -> None:
    """A normal prior far away; another fit was made under it, and its draws reach the target."""
    readings = np.random.default_rng(5).normal(0.10, 0.03, size=20)

    def loglik(d: Draws) -> Array:
        return np.asarray(-0.5 * ((readings - d["rate"][:, None]) / 0.03) ** 2)

    def fitted(mean: float, sd: float, seed: int) -> tuple[sy.Fit, float]:
        precision = 20 / 0.03**2 + 1 / sd**2
        centre = (readings.sum() / 0.03**2 + mean / sd**2) / precision
        rate = np.random.default_rng(seed).normal(centre, precision**-0.5, size=(4, 500))
        return sy.Fit({"rate": rate}, {"rate": sy.Normal(mean, sd)}, loglik), centre

    base, _ = fitted(0.10, 0.1, 1)
    other, _ = fitted(0.14, 0.007, 2)
    _, truth = fitted(0.145, 0.006, 3)
    change = sy.swap_prior(rate=sy.Normal(0.145, 0.006))
    answer = base.repair(change, fits=[other], rungs="pooling")
    assert answer.ladder.chosen == "pooling"
    assert answer.ladder["smoothing"].level < "sound"
    assert answer.verdict.is_sound
    mean = answer.mean("rate")
    assert abs(mean.value - truth) <= 4 * mean.error
    with pytest.raises(QuantityError, match="moved"):
        answer.mean(base.draws["rate"])
    assert "pooling" not in [r.name for r in base.repair(change).ladder]
