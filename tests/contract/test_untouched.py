"""Nothing that a user passes in is changed, whatever is asked afterwards."""

from __future__ import annotations

import copy
from typing import Any

import numpy as np
import pytest

import steelyard as sy

RNG = np.random.default_rng(20_261_244)


def _inputs() -> dict[str, np.ndarray]:
    return {
        "mu": RNG.normal(size=(4, 80)),
        "rate": RNG.normal(size=(4, 80, 3)),
        "own": RNG.normal(size=(4, 80)),
        "loglik": 0.1 * RNG.normal(size=(4, 80, 5)),
        "new loglik": 0.1 * RNG.normal(size=(4, 80, 5)),
        "prior": RNG.normal(size=(4, 80)),
        "new prior": RNG.normal(size=(4, 80)),
        "ratio": 0.1 * RNG.normal(size=(4, 80)),
        "factors": RNG.uniform(0, 2, size=5),
        "quantity": RNG.normal(size=(4, 80, 2)),
        "out": np.zeros(320),
    }


def _use(given: dict[str, np.ndarray]) -> list[Any]:
    """Everything that an array can be passed to, and everything that can be asked."""
    fit = sy.Fit(
        {"mu": given["mu"], "rate": given["rate"]},
        {"old": given["prior"]},
        given["loglik"],
        log_weights=given["own"],
        stored_log_density=given["own"],
    )
    change = (
        sy.swap_prior(old=given["new prior"])
        & sy.swap_loglik(given["new loglik"])
        & sy.weigh_data({"likelihood": given["factors"]})
        & sy.log_ratio(given["ratio"])
    )
    answer = fit.reweigh(change)
    asked: list[Any] = [answer, answer.table(), answer.interval("rate", kind="shortest")]
    for quantity in ("mu", "rate", given["quantity"]):
        asked += [answer.mean(quantity), answer.sd(quantity), answer.shift(quantity)]
        asked += [answer.quantile(quantity), answer.distance(quantity)]
    asked += [answer.prob(given["quantity"] > 0), answer.prob("mu > 0", 0.5)]
    asked += [answer.covariance(), answer.divergence, answer.log_evidence_ratio]
    asked += [answer.resample(30, rng=1), sy.weigh(given["ratio"], {"mu": given["mu"]})]
    return asked


def test_no_input_is_changed_or_frozen() -> None:
    given = _inputs()
    before = copy.deepcopy(given)
    _use(given)
    for name, array in given.items():
        assert np.array_equal(array, before[name]), name
        assert array.flags.writeable, name


def test_inputs_that_cannot_be_written_serve_as_well() -> None:
    given = _inputs()
    plain = [repr(one) for one in _use(given)]
    for array in given.values():
        array.flags.writeable = False
    assert [repr(one) for one in _use(given)] == plain


def test_mappings_and_lists_are_not_changed() -> None:
    given = _inputs()
    draws = {"mu": given["mu"], "rate": given["rate"]}
    prior = {"mu": sy.Normal(0, 2)}
    loglik = {"gauge A": given["loglik"]}
    names = ["mu"]
    fit = sy.Fit(draws, prior, loglik, derived=["rate"])
    sy.Fit(given["mu"][..., None], names=names)
    fit.reweigh(sy.power({"mu": 0.5}, {"gauge A": 0.9}))
    assert list(draws) == ["mu", "rate"]
    assert list(prior) == ["mu"]
    assert list(loglik) == ["gauge A"]
    assert names == ["mu"]
    draws["tau"] = given["mu"]
    prior.clear()
    loglik.clear()
    assert list(fit.draws) == ["mu", "rate"]
    assert len(fit.reweigh(sy.power({"mu": 0.5}, {"gauge A": 0.9})).terms) == 2


def test_values_of_answers_are_their_own_memory() -> None:
    given = _inputs()
    for one in _use(given):
        if isinstance(one, sy.Estimate):
            for array in given.values():
                assert not np.shares_memory(np.asarray(one.value), array)


def test_what_a_user_does_to_a_callables_result_afterwards_does_no_harm() -> None:
    kept: list[np.ndarray] = []

    def ratio(draws: Any) -> np.ndarray:
        kept.append(0.2 * draws["mu"])
        return kept[-1]

    answer = sy.Fit({"mu": _inputs()["mu"]}).reweigh(sy.log_ratio(ratio))
    before = answer.log_weights.tobytes(), answer.terms["log ratio"].tobytes()
    kept[0][...] = 0
    assert (answer.log_weights.tobytes(), answer.terms["log ratio"].tobytes()) == before
    with pytest.raises(ValueError, match="read-only"):
        answer.terms["log ratio"][...] = 0
