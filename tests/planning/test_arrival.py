"""Data that arrive batch by batch, against the exact posterior of a normal mean."""

from __future__ import annotations

import io
import pickle
from pathlib import Path
from typing import Any

import numpy as np
import pytest

import steelyard as sy
from steelyard.planning import Arrival

SEED = 20_261_210
N = 4000


def draws() -> np.ndarray:
    return np.random.default_rng(SEED).normal(size=(4, N // 4))


def fitted() -> sy.Fit:
    return sy.Fit({"mu": draws()}, {"mu": sy.Normal(0, 1)})


def batch(readings: np.ndarray, mu: np.ndarray, sd: float = 2.0) -> np.ndarray:
    return -0.5 * ((readings - mu[..., None]) / sd) ** 2 - np.log(sd)


def exact(readings: np.ndarray, sd: float = 2.0) -> tuple[float, float]:
    precision = 1 + len(readings) / sd**2
    return readings.sum() / sd**2 / precision, precision**-0.5


def test_each_batch_gives_the_exact_posterior() -> None:
    rng = np.random.default_rng(SEED + 1)
    arrival, seen = fitted().arrive(), np.empty(0)
    for week in range(1, 5):
        readings = rng.normal(0.5, 2.0, size=3)
        seen = np.concatenate([seen, readings])
        answer = arrival.add(f"week {week}", batch(readings, draws()))
        mean, sd = answer.mean("mu"), answer.sd("mu")
        assert abs(mean.value - exact(seen)[0]) < 4 * mean.error
        assert abs(sd.value - exact(seen)[1]) < 4 * sd.error
    sizes = [step.effective_size for step in arrival.history]
    assert max(sizes) < arrival.base_size
    assert [step.observations for step in arrival.history] == [3, 3, 3, 3]
    assert arrival.answer.mean("mu").value == mean.value
    assert arrival.change is not None


def test_batches_may_be_callables_totals_and_in_any_order() -> None:
    readings = np.array([0.3, -1.2, 2.0])
    values = batch(readings, draws())
    one, two, three = (fitted().arrive() for _ in range(3))
    one.add("a", values)
    two.add("a", lambda d: batch(readings, d["mu"]))
    three.add("a", values.sum(axis=-1))
    means = [a.answer.mean("mu").value for a in (one, two, three)]
    assert means[1:] == pytest.approx([means[0]] * 2, rel=1e-12)


def test_a_refit_is_asked_for_before_the_answer_is_wrong() -> None:
    """Readings four sds from what the prior expects: the draws run out."""
    arrival = fitted().arrive()
    for week in range(1, 12):
        answer = arrival.add(f"week {week}", batch(np.full(4, 4.0), draws(), 1.0))
        if answer.verdict.level == "refit":
            break
    assert answer.verdict.level == "refit"
    assert arrival.forecast().due == 0
    assert "due now" in str(arrival.forecast())


def simulated(values: Any, rng: np.random.Generator) -> np.ndarray:
    readings = values["mu"] + 0.05 * rng.normal(size=20)
    return batch(readings, draws().reshape(-1), 0.05)


def test_a_forecast_before_any_data_is_what_happens() -> None:
    """
    Sixty weeks played from the prior; the simulated forecast of the median must agree.

    Medians of 40 and of 60 futures: each within a batch of the true one but once in a few hundred.
    """
    found = fitted().arrive().forecast(simulated, batches=20, repeats=40, rng=3)
    rng = np.random.default_rng(SEED + 2)
    due = []
    for _ in range(40):
        truth = {"mu": rng.normal()}
        arrival = fitted().arrive()
        for week in range(20):
            answer = arrival.add(f"week {week}", simulated(truth, rng))
            if answer.verdict.level == "refit":
                break
        due.append(week + 1)
    assert found.how == "simulated"
    assert found.due is not None
    low, high = np.quantile(due, [0.2, 0.8])
    assert low <= found.due <= high
    assert found.earliest is not None
    assert found.earliest <= found.due


def test_a_history_is_continued() -> None:
    rng = np.random.default_rng(SEED)
    arrival = fitted().arrive()
    assert arrival.forecast().how == "unknown"
    assert "simulate" in str(arrival.forecast())
    for week in range(3):
        arrival.add(f"week {week}", batch(rng.normal(1.5, 1, size=4), draws(), 1.0))
    found = arrival.forecast(batches=400)
    assert found.how == "continued"
    assert found.due is not None
    assert found.earliest is not None
    assert found.earliest <= found.due
    assert found.sizes[0] < arrival.history[-1].effective_size
    assert (np.diff(found.sizes) < 0).all()


def test_forecasts_hang_on_the_seed_alone() -> None:
    arrival = fitted().arrive()
    results = []
    for threads in (1, 7):
        with sy.threads(threads):
            results.append(arrival.forecast(simulated, batches=4, repeats=3, rng=9).sizes)
    assert results[0].tobytes() == results[1].tobytes()


def test_an_arrival_goes_on_from_disk(tmp_path: Path) -> None:
    arrival = fitted().arrive()
    for week in (1, 2):
        arrival.add(f"week {week}", batch(np.array([0.1, week]), draws()))
    arrival.save(tmp_path / "quay.npz")
    again = fitted().arrive(tmp_path / "quay.npz")
    assert again.history == arrival.history
    assert again.answer.log_weights.tobytes() == arrival.answer.log_weights.tobytes()
    again.add("week 3", batch(np.array([0.4]), draws()))
    assert len(again.history) == 3
    fitted().arrive().save(tmp_path / "empty.npz")
    assert fitted().arrive(tmp_path / "empty.npz").history == ()


def test_pickled_objects_are_refused(tmp_path: Path) -> None:
    arrival = fitted().arrive()
    arrival.add("week 1", batch(np.array([0.1]), draws()))
    path = tmp_path / "quay.npz"
    arrival.save(path)
    with np.load(path) as held:
        content = dict(held)
    for changed in (
        {"names": np.array([{"a": 1}], dtype=object)},
        {"steelyard_arrival": np.array(2)},
        {"totals": content["totals"][:, :-1]},
        {"observations": np.array([1, 2])},
        {"draws": np.array("0" * 64)},
    ):
        np.savez(path, **{**content, **changed})
        with pytest.raises(sy.errors.DrawsError):
            fitted().arrive(path)
    path.write_bytes(pickle.dumps({"names": ["week 1"]}))
    with pytest.raises(sy.errors.DrawsError, match="pickle"):
        fitted().arrive(path)
    other = sy.Fit({"mu": draws() + 1}, {"mu": sy.Normal(0, 1)})
    arrival.save(path)
    with pytest.raises(sy.errors.DrawsError, match="these draws"):
        Arrival.load(path, other)
    assert io.BytesIO(path.read_bytes()).read(2) == b"PK"


def test_bad_batches_are_told_and_leave_no_trace() -> None:
    arrival = fitted().arrive()
    good = batch(np.array([0.1]), draws())
    arrival.add("week 1", good)
    with pytest.raises(sy.errors.ArgumentError, match="which one has"):
        arrival.add("week 1", good)
    with pytest.raises(sy.errors.ShapeError):
        arrival.add("week 2", good[:, :-1])
    with pytest.raises(sy.errors.LikelihoodError):
        arrival.add("week 2", np.where(np.arange(N // 4)[None, :, None] == 7, np.nan, good))
    with pytest.raises(sy.errors.RatioError):
        arrival.add("week 2", np.full_like(good, -np.inf))
    with pytest.raises(sy.errors.ArgumentTypeError):
        arrival.add(2, good)  # type: ignore[arg-type]
    with pytest.raises(sy.errors.ArgumentError):
        arrival.forecast(batches=0)
    with pytest.raises(sy.errors.ArgumentTypeError):
        arrival.forecast(3)  # type: ignore[arg-type]
    assert [step.name for step in arrival.history] == ["week 1"]


def test_an_arrival_prints_and_plots() -> None:
    arrival = fitted().arrive()
    assert "no batch yet" in str(arrival)
    arrival.add("week 1", batch(np.array([0.1, 1.0]), draws()))
    assert "week 1" in str(arrival)
    assert "<table>" in arrival._repr_html_()
    assert repr(arrival) == "<Arrival of 1 batches, now sound>"
    pytest.importorskip("matplotlib").use("Agg")
    assert arrival.plot().get_yscale() == "log"
