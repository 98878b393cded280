"""Base and target at new points: the same numbers as at the draws, counted, and refused by name."""

from __future__ import annotations

from collections.abc import Callable, Mapping
from typing import Any

import numpy as np
import pytest
from numpy.typing import NDArray
from scipy import stats

import steelyard as sy
from steelyard.changes import form_target
from steelyard.errors import (
    DrawsError,
    LikelihoodError,
    PriorError,
    RatioError,
    ShapeError,
    SteelyardError,
)
from steelyard.repair import Evaluator, evaluator_of

Array = NDArray[np.float64]
Draws = Mapping[str, Array]
READINGS = np.array([0.08, 0.11, 0.16, 0.09])


def _draws(seed: int = 1) -> dict[str, Array]:
    rng = np.random.default_rng(seed)
    return {
        "rate": rng.normal(0.1, 0.03, size=(4, 50, 4)),
        "mu": rng.normal(0.1, 0.02, size=(4, 50)),
        "tau": rng.gamma(9, 1 / 300, size=(4, 50)),
        "sd": rng.gamma(9, 1 / 300, size=(4, 50)),
    }


def gauge_a(d: Draws) -> Array:
    return np.asarray(stats.norm.logpdf(READINGS, d["rate"], d["sd"][:, None]))


def gauge_b(d: Draws) -> Array:
    return np.asarray(stats.norm.logpdf(0.12, d["mu"], d["sd"]))  # a total


def heavy(d: Draws) -> Array:
    return np.asarray(stats.t.logpdf(READINGS, 4, d["rate"], d["sd"][:, None]))


PRIOR = {
    "rate": sy.Normal("mu", "tau"),
    "mu": sy.Normal(0.1, 0.1),
    "tau": sy.HalfNormal(0.05),
    "sd": sy.Gamma(4, 100),
}


def _fit(**changed: Any) -> sy.Fit:
    settings: dict[str, Any] = {"prior": PRIOR, "loglik": {"A": gauge_a, "B": gauge_b}}
    return sy.Fit(_draws(), **{**settings, **changed})


CHANGES = {
    "swap_prior": sy.swap_prior(tau=sy.HalfCauchy(0.05), rate=sy.StudentT(4, "mu", "tau")),
    "callable prior": sy.swap_prior(mu=lambda d: -np.abs(d["mu"])),
    "frozen prior": sy.swap_prior(mu=stats.norm(0.2, 0.1)),
    "power": sy.power(prior=0.7, likelihood={"A": 0.5}),
    "power of a swap": sy.swap_prior(tau=sy.Exponential(9)) & sy.power(prior={"tau": 0.5}),
    "no prior": sy.power(prior=0),
    "drop": sy.drop({"A": [1, 2]}),
    "drop a term": sy.drop("B"),
    "add": sy.add({"C": lambda d: -50 * (d["rate"] - 0.2) ** 2}),
    "weigh_data": sy.weigh_data({"A": [1.0, 0.5, 0.0, 2.0], "B": 3.0}),
    "raise_noise": sy.raise_noise("A", 1.7, sd="sd"),
    "raise_noise by a callable": sy.raise_noise("A", 0.8, sd=lambda d: d["sd"]),
    "swap_loglik": sy.swap_loglik({"A": heavy}) & sy.drop({"A": [0]}),
    "log_ratio": sy.log_ratio(lambda d: 9 * d["mu"]),
}


@pytest.mark.parametrize("name", CHANGES)
def test_target_minus_base_is_what_the_draws_themselves_give(name: str) -> None:
    record = _fit()._record
    evaluator = evaluator_of(record, CHANGES[name])
    base, target = evaluator.both(evaluator.start)
    ratio = form_target(record, CHANGES[name]).log_ratio
    # Sums of some twenty terms of the size of a hundred.
    np.testing.assert_allclose(target - base, ratio, atol=1e-10)


@pytest.mark.parametrize("name", CHANGES)
def test_the_density_at_moved_points_is_that_of_a_fit_with_these_draws(name: str) -> None:
    evaluator = evaluator_of(_fit()._record, CHANGES[name])
    x = evaluator.start + np.random.default_rng(2).normal(0, 0.2, size=evaluator.start.shape)
    moved, _ = evaluator.moved(x)
    fresh = sy.Fit(dict(moved), PRIOR, {"A": gauge_a, "B": gauge_b})
    base, target = evaluator.both(x)
    ratio = form_target(fresh._record, CHANGES[name]).log_ratio
    np.testing.assert_allclose(target - base, ratio, atol=1e-10)
    exact = (
        stats.norm.logpdf(moved["rate"], moved["mu"][:, None], moved["tau"][:, None]).sum(1)
        + stats.norm.logpdf(moved["mu"], 0.1, 0.1)
        + stats.halfnorm.logpdf(moved["tau"], scale=0.05)
        + stats.gamma.logpdf(moved["sd"], 4, scale=1 / 100)
        + gauge_a(moved).sum(axis=1)
        + gauge_b(moved)
        + np.log(moved["tau"])
        + np.log(moved["sd"])
    )
    np.testing.assert_allclose(base, exact, rtol=1e-10)


def test_points_and_batches_are_counted_and_asked_for_once() -> None:
    calls: list[int] = []

    def counted(d: Draws) -> Array:
        calls.append(len(d["mu"]))
        return gauge_b(d)

    evaluator = evaluator_of(_fit(loglik={"A": gauge_a, "B": counted})._record)
    x, calls[:] = evaluator.start, []
    evaluator.base(x)
    evaluator.target(x.copy())
    evaluator.both(x[:7])
    assert calls == [200, 7]
    assert (evaluator.spent.points, evaluator.spent.batches) == (207, 2)


def test_one_density_without_a_change() -> None:
    evaluator = evaluator_of(_fit()._record)
    x = evaluator.start
    assert isinstance(evaluator, Evaluator)
    np.testing.assert_array_equal(evaluator.log_density(x), evaluator.base(x))


def test_derived_quantities_are_recomputed() -> None:
    fit = _fit(derived={"loss": lambda d: 10 * d["mu"]})
    evaluator = evaluator_of(fit._record, sy.log_ratio(lambda d: d["loss"]))
    x = evaluator.start + 0.1
    moved, _ = evaluator.moved(x)
    np.testing.assert_allclose(moved["loss"], 10 * moved["mu"])
    base, target = evaluator.both(x)
    np.testing.assert_allclose(target - base, 10 * moved["mu"], atol=1e-12)


def test_minus_infinity_is_a_density_of_zero() -> None:
    cut = sy.log_ratio(lambda d: np.where(d["mu"] > 0.1, 0.0, -np.inf))
    evaluator = evaluator_of(_fit()._record, cut)
    moved, _ = evaluator.moved(evaluator.start)
    target = evaluator.target(evaluator.start)
    np.testing.assert_array_equal(target == -np.inf, moved["mu"] <= 0.1)


def _bad_at_one(value: float) -> Callable[[Draws], Array]:
    def loglik(d: Draws) -> Array:
        values = gauge_a(d).copy()
        values[d["mu"] == d["mu"].max()] = value
        return values if len(values) > 1 else gauge_a(d)

    return loglik


def _ratio_nan(d: Draws) -> Array:
    return np.where(d["mu"] == d["mu"].max(), np.nan, 0.0) if len(d["mu"]) > 1 else 0 * d["mu"]


BAD_VALUES: dict[str, tuple[Any, sy.Change, type[SteelyardError]]] = {
    "NaN in the likelihood": ({"A": _bad_at_one(np.nan)}, sy.power(), LikelihoodError),
    "+inf in the likelihood": ({"A": _bad_at_one(np.inf)}, sy.power(), LikelihoodError),
    "NaN in a prior": (
        {"A": gauge_a},
        sy.swap_prior(mu=lambda d: np.where(d["mu"] == d["mu"].max(), np.nan, 0.0)),
        PriorError,
    ),
    "NaN in a ratio": ({"A": gauge_a}, sy.log_ratio(_ratio_nan), RatioError),
}


@pytest.mark.parametrize("name", BAD_VALUES)
def test_a_value_that_is_no_density_is_an_error_that_names_the_point(name: str) -> None:
    loglik, change, error = BAD_VALUES[name]
    evaluator = evaluator_of(_fit(loglik=loglik)._record, change)
    x = evaluator.start
    worst = evaluator.moved(x)[0]["mu"].max()
    with pytest.raises(error, match=rf"the point .*mu={worst:.6g}"):
        evaluator.both(x)


def test_a_wrong_shape_is_an_error() -> None:
    def short(d: Draws) -> Array:
        return gauge_a(d)[: 1 + len(d["mu"]) // 2]

    evaluator = evaluator_of(_fit(loglik={"A": short})._record)
    with pytest.raises(ShapeError, match=r"\(200, 4\) for 200 draws"):
        evaluator.both(evaluator.start)
    with pytest.raises(ShapeError, match=r"shape \(n, 7\)"):
        evaluator.both(evaluator.start[:, :3])


def _values(loglik: Callable[[Draws], Array]) -> Array:
    flat = {k: v.reshape(200, *v.shape[2:]) for k, v in _draws().items()}
    return loglik(flat)


FIXED: dict[str, tuple[dict[str, Any], sy.Change, type[SteelyardError], str]] = {
    "an array term": (
        {"loglik": {"A": _values(gauge_a)}},
        sy.power(),
        LikelihoodError,
        "loglik.*A",
    ),
    "an array swapped in": (
        {},
        sy.swap_loglik({"A": _values(heavy)}),
        LikelihoodError,
        "swap_loglik.*A",
    ),
    "an array added": ({}, sy.add({"C": _values(heavy)}), LikelihoodError, "add.*C"),
    "no likelihood": (
        {"loglik": None},
        sy.swap_prior(mu=sy.Normal(0, 1)),
        LikelihoodError,
        "without",
    ),
    "an array prior": (
        {"prior": {**PRIOR, "mu": np.zeros(200)}},
        sy.power(),
        PriorError,
        "prior.*mu",
    ),
    "an array prior swapped in": (
        {},
        sy.swap_prior(mu=np.zeros(200)),
        PriorError,
        "swap_prior.*mu",
    ),
    "an array ratio": ({}, sy.log_ratio(np.zeros(200)), RatioError, "log_ratio"),
    "no prior": ({"prior": None}, sy.power(), PriorError, "without prior"),
    "a parameter without prior": (
        {"prior": {k: v for k, v in PRIOR.items() if k != "sd"}},
        sy.power(),
        PriorError,
        "none for sd",
    ),
    "an element without prior": (
        {"prior": {"mu": sy.Flat(), "tau": sy.Flat(0), "sd": sy.Flat(0), "rate[1]": sy.Flat()}},
        sy.power(),
        PriorError,
        r"none for rate\[0\], rate\[2\], rate\[3\]",
    ),
}


@pytest.mark.parametrize("name", FIXED)
def test_what_cannot_move_is_refused_by_name(name: str) -> None:
    changed, change, error, said = FIXED[name]
    with pytest.raises(error, match=said):
        evaluator_of(_fit(**changed)._record, change)


def test_a_whole_number_cannot_be_moved() -> None:
    counts = np.random.default_rng(1).poisson(4.0, size=200).astype(float)
    fit = sy.Fit({"pits": counts}, {"pits": sy.Poisson(4)}, lambda d: 0 * d["pits"])
    with pytest.raises(PriorError, match="continuous"):
        evaluator_of(fit._record)


def test_a_value_that_is_only_stored_is_missed_by_name() -> None:
    draws = _draws()
    draws["stored"] = draws["mu"] * 2
    fit = sy.Fit(
        draws,
        PRIOR,
        {"A": gauge_a, "B": lambda d: d["stored"]},
        derived=["stored"],
    )
    evaluator = evaluator_of(fit._record)
    with pytest.raises(DrawsError, match="'stored'"):
        evaluator.both(evaluator.start)


def test_a_draw_on_the_limit_of_its_support_has_no_coordinate() -> None:
    draws = _draws()
    draws["tau"][0, 3] = 0.0
    fit = sy.Fit({"tau": draws["tau"]}, {"tau": sy.HalfNormal(1)}, lambda d: 0 * d["tau"])
    with pytest.raises(DrawsError, match="chain 0, draw 3"):
        _ = evaluator_of(fit._record).start


def test_a_vector_called_ascending_has_to_be() -> None:
    with pytest.raises(PriorError, match="ascending order"):
        evaluator_of(_fit()._record, ascending=("rate",))


def test_callables_beside_a_flat_prior_say_the_density_and_it_the_support() -> None:
    draws = {"tau": np.random.default_rng(3).gamma(3, size=200)}
    fit = sy.Fit(
        draws,
        {"tau": sy.Flat(0), "joint": lambda d: -d["tau"]},
        lambda d: 0 * d["tau"],
    )
    evaluator = evaluator_of(fit._record)
    np.testing.assert_allclose(evaluator.start[:, 0], np.log(draws["tau"]))
    np.testing.assert_allclose(
        evaluator.base(evaluator.start), -draws["tau"] + np.log(draws["tau"]), atol=1e-12
    )
