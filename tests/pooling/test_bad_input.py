"""What cannot be pooled is refused, and told."""

from __future__ import annotations

from typing import Any

import numpy as np
import pytest

import steelyard as sy

SEED = 20_261_213
X = np.random.default_rng(SEED).normal(size=(4, 100))
LOGLIK = -0.5 * (X[..., None] - np.zeros(3)) ** 2


def fit(prior: Any = None, loglik: Any = None, draws: Any = None) -> sy.Fit:
    prior = {"x": sy.Normal(0, 1)} if prior is None else prior
    return sy.Fit({"x": X} if draws is None else draws, prior, loglik)


def pooled(*fits: Any, **given: Any) -> sy.Pool:
    asked = {"data": "same", "common": "likelihood", **given}
    return sy.pool(list(fits), **asked)


ARRAY = {"gauge A": LOGLIK}
CASES = {
    "a single fit": (lambda: pooled(fit()), "ArgumentError", "at least two"),
    "no fit": (lambda: pooled(), "ArgumentError", "at least two"),
    "not a list": (
        lambda: sy.pool(fit(), data="same"),
        "ArgumentTypeError",
        "a list of fits",
    ),
    "something else": (lambda: pooled(fit(), X), "ArgumentTypeError", "ndarray as fit 2"),
    "other data": (lambda: pooled(fit(), fit(), data="both"), "ArgumentError", "'disjoint'"),
    "data as True": (lambda: pooled(fit(), fit(), data=True), "ArgumentError", "'same'"),
    "a pool": (
        lambda: pooled(pooled(fit(), fit()), fit()),
        "ArgumentTypeError",
        "all of its fits",
    ),
    "other names": (
        lambda: pooled(fit(), fit({"y": sy.Normal(0, 1)}, draws={"y": X})),
        "DrawsError",
        "only",
    ),
    "other shapes": (
        lambda: pooled(fit(), fit({"x": sy.Normal(0, 1)}, draws={"x": np.stack([X, X], -1)})),
        "ShapeError",
        "same parameters",
    ),
    "other data size": (
        lambda: pooled(
            fit(loglik=ARRAY), fit(loglik={"gauge A": LOGLIK[..., :2]}), common="gauge A"
        ),
        "ShapeError",
        "same data",
    ),
    "unknown common": (
        lambda: pooled(fit(loglik=ARRAY), fit(loglik=ARRAY), common="gauge B"),
        "UnknownNameError",
        "gauge A",
    ),
    "common of another type": (
        lambda: pooled(fit(loglik=ARRAY), fit(loglik=ARRAY), common=3),
        "ArgumentTypeError",
        "names of terms",
    ),
    "common in one only": (
        lambda: pooled(fit(loglik=ARRAY), fit(loglik={"gauge B": LOGLIK}), common="gauge A"),
        "UnknownNameError",
        "fit 2 does not",
    ),
    "common that differs": (
        lambda: pooled(
            fit(loglik=ARRAY), fit({"x": sy.Normal(0, 2)}, ARRAY), common=("gauge A", "x")
        ),
        "PriorError",
        "same in all",
    ),
    "an array not in common": (
        lambda: pooled(fit(loglik=ARRAY), fit(loglik=ARRAY), common=()),
        "LikelihoodError",
        "common=",
    ),
    "a prior array": (
        lambda: pooled(fit({"t": np.zeros((4, 100))}), fit()),
        "PriorError",
        "a distribution or a callable",
    ),
    "no likelihood, not said": (
        lambda: pooled(fit(), fit(), common=()),
        "LikelihoodError",
        "'likelihood' where none",
    ),
    "no prior": (lambda: pooled(fit({}), fit()), "PriorError", "whose prior is stated"),
    "constants of wrong length": (
        lambda: pooled(fit(), fit(), log_constants=[0.0, 1.0, 2.0]),
        "ShapeError",
        "one number a fit",
    ),
    "infinite constants": (
        lambda: pooled(fit(), fit(), log_constants=[0.0, np.inf]),
        "ArgumentError",
        "finite",
    ),
    "constants as text": (
        lambda: pooled(fit(), fit(), log_constants="none"),
        "ArgumentTypeError",
        "real numbers",
    ),
    "draws that their terms exclude": (
        lambda: pooled(fit(), fit({"t": lambda d: np.where(d["x"] > 0, 0.0, -np.inf)})),
        "RatioError",
        "did not come from these terms",
    ),
    "NaN likelihood": (
        lambda: pooled(
            fit(loglik={"a": lambda d: np.log(d["x"] + 9)}),
            fit(loglik={"a": lambda d: np.where(d["x"] > 2, np.nan, 0.0)}),
            common=(),
        ),
        "LikelihoodError",
        "finite or −inf",
    ),
    "disjoint with common": (
        lambda: pooled(fit(loglik=ARRAY), fit(loglik=ARRAY), data="disjoint", common="gauge A"),
        "ArgumentError",
        "share no term",
    ),
    "disjoint without likelihood": (
        lambda: pooled(fit(), fit(), data="disjoint", common=()),
        "LikelihoodError",
        "counted once",
    ),
    "disjoint without prior": (
        lambda: pooled(fit({}, ARRAY), fit({}, ARRAY), data="disjoint", common=()),
        "PriorError",
        "counted once",
    ),
    "derived parameters": (
        lambda: pooled(
            *[fit({"x": sy.Normal(0, 1)}, ARRAY, {"x": X, "twice": 2 * X}) for _ in range(2)],
            data="disjoint",
            common=(),
        ),
        "DrawsError",
        "hang on others",
    ),
}


@pytest.mark.parametrize("name", CASES)
def test_it_is_refused_and_told(name: str) -> None:
    call, error, told = CASES[name]
    with pytest.raises(getattr(sy.errors, error), match=told):
        call()


def test_data_has_no_default() -> None:
    with pytest.raises(TypeError, match="data"):
        sy.pool([fit(), fit()])  # type: ignore[call-arg]


def test_a_name_that_is_prior_and_likelihood_must_say_which() -> None:
    held = [fit({"x": sy.Normal(0, sd)}, {"x": LOGLIK}) for sd in (1, 2)]
    with pytest.raises(sy.errors.ArgumentError, match="'prior: x' or 'likelihood: x'"):
        pooled(*held, common="x")
    assert pooled(*held, common="likelihood: x").draws.size == 800
