"""`steelyard.weights`: shapes, axes, kinds of input and `out=`."""

from __future__ import annotations

from collections.abc import Callable
from typing import Any

import numpy as np
import pytest

from steelyard import weights

RNG = np.random.default_rng(20_261_242)
X = RNG.normal(size=(4, 60, 3, 2))

REDUCING: dict[str, Callable[..., Any]] = {
    "log_sum_exp": weights.log_sum_exp,
    "effective_size": weights.effective_size,
    "entropy size": lambda x, axis=None: weights.effective_size(x, axis, "entropy"),
    "largest_share": weights.largest_share,
    "tail_shape": weights.tail_shape,
}
KEEPING: dict[str, Callable[..., Any]] = {
    "normalise": weights.normalise,
    "smooth": lambda x, axis=None: weights.smooth(x, axis).log_weights,
}
AXES = [(0, (60, 3, 2)), (1, (4, 3, 2)), (-1, (4, 60, 3)), ((0, 1), (3, 2)), ((1, 0), (3, 2))]


def _by_hand(function: Callable[..., Any], axis: Any, keep: bool) -> np.ndarray:
    """The function on each column of draws, one after the other."""
    axes = (axis,) if isinstance(axis, int) else axis
    moved = np.moveaxis(X, axes, range(len(axes)))
    drawn, kept = moved.shape[: len(axes)], moved.shape[len(axes) :]
    columns = moved.reshape(int(np.prod(drawn)), -1)
    found = np.array([function(column) for column in columns.T])
    if not keep:
        return found.reshape(kept)
    return np.moveaxis(found.T.reshape(*drawn, *kept), range(len(axes)), axes)


@pytest.mark.parametrize("name", REDUCING)
@pytest.mark.parametrize(("axis", "shape"), AXES, ids=repr)
def test_reducing_functions_leave_the_other_axes(
    name: str, axis: Any, shape: tuple[int, ...]
) -> None:
    got = REDUCING[name](X, axis)
    assert got.shape == shape
    assert np.array_equal(got, _by_hand(REDUCING[name], axis, keep=False))


@pytest.mark.parametrize("name", KEEPING)
@pytest.mark.parametrize(("axis", "shape"), AXES, ids=repr)
def test_keeping_functions_keep_all_axes_in_place(
    name: str, axis: Any, shape: tuple[int, ...]
) -> None:
    got = KEEPING[name](X, axis)
    assert got.shape == X.shape
    assert np.array_equal(got, _by_hand(KEEPING[name], axis, keep=True))
    # 1e-12: sums of at most 240 weights.
    np.testing.assert_allclose(np.exp(got).sum(axis=axis), np.ones(shape), atol=1e-12)


@pytest.mark.parametrize("name", REDUCING)
def test_one_vector_gives_a_plain_number(name: str) -> None:
    assert isinstance(REDUCING[name](X.ravel()), float)
    assert isinstance(REDUCING[name](X.ravel().tolist()), float)


@pytest.mark.parametrize("name", [*REDUCING, *KEEPING])
def test_log_weights_need_not_be_normalised(name: str) -> None:
    function = {**REDUCING, **KEEPING}[name]
    got, moved = function(X, 1), function(X + 3e4, 1)
    # 1e-10: sixteen digits of 3e4 leave eleven.
    shift = 3e4 if name == "log_sum_exp" else 0.0
    np.testing.assert_allclose(moved - shift, got, atol=1e-9)


@pytest.mark.parametrize("name", [*REDUCING, *KEEPING])
@pytest.mark.parametrize("dtype", [np.float32, np.int32])
def test_narrow_input_is_converted_and_results_are_double(name: str, dtype: Any) -> None:
    function = {**REDUCING, **KEEPING}[name]
    narrow = (3 * X).astype(dtype)
    got = function(narrow, 1)
    assert got.dtype == np.float64
    assert np.array_equal(got, function(narrow.astype(np.float64), 1))


@pytest.mark.parametrize("name", [*REDUCING, *KEEPING])
def test_input_is_not_changed(name: str) -> None:
    before = X.copy()
    {**REDUCING, **KEEPING}[name](X, (0, 1))
    assert np.array_equal(X, before)


@pytest.mark.parametrize("order", ["C", "F"])
@pytest.mark.parametrize(
    "function", [weights.normalise, weights.smooth], ids=["normalise", "smooth"]
)
def test_out_is_written_and_returned(function: Callable[..., Any], order: Any) -> None:
    out = np.empty(X.shape, order=order)
    got = function(X, 1, out=out)
    log_weights = got.log_weights if function is weights.smooth else got
    assert log_weights is out
    plain = function(X, 1)
    assert np.array_equal(out, plain.log_weights if function is weights.smooth else plain)


def test_out_may_be_the_input() -> None:
    x = X.copy()
    want = weights.normalise(x, 1)
    assert weights.normalise(x, 1, out=x) is x
    assert np.array_equal(x, want)


def test_smooth_gives_a_named_pair() -> None:
    smoothed = weights.smooth(X, 1)
    assert smoothed.log_weights.shape == X.shape
    assert smoothed.tail_shape.shape == (4, 3, 2)
    log_weights, tail_shape = weights.smooth(X.ravel())
    assert log_weights.shape == (X.size,)
    assert isinstance(tail_shape, float)
    assert np.array_equal(weights.tail_shape(X, 1), smoothed.tail_shape)


def test_an_efficiency_may_be_one_number_or_one_a_column() -> None:
    x = X.reshape(4 * 60, 6)
    one = weights.tail_shape(x, 0, 0.5)
    assert np.array_equal(one, weights.tail_shape(x, 0, np.full(6, 0.5)))
    assert not np.array_equal(one, weights.tail_shape(x, 0))


def test_weights_of_zero_stay_zero() -> None:
    x = X[..., 0, 0].ravel().copy()
    x[::7] = -np.inf
    for got in (weights.normalise(x), weights.smooth(x).log_weights):
        assert np.all(got[::7] == -np.inf)
        assert np.exp(got).sum() == pytest.approx(1, abs=1e-12)


@pytest.mark.parametrize("shape", [(), (3,), (3, 2)])
@pytest.mark.parametrize("probs", [0.5, [0.5], [[0.1, 0.5], [0.9, 1.0]]], ids=repr)
def test_quantiles_put_the_axes_of_probabilities_first(shape: tuple[int, ...], probs: Any) -> None:
    x, logs = RNG.normal(size=(50, *shape)), RNG.normal(size=50)
    got = weights.quantile(x, logs, probs)
    assert np.shape(got) == (*np.shape(probs), *shape)
    if np.shape(got) == ():
        assert isinstance(got, float)


def test_influence_has_observations_first_and_quantities_last() -> None:
    loglik = 0.1 * RNG.normal(size=(80, 4, 2))
    for quantities, shape in ((np.arange(80.0), ()), (RNG.normal(size=(80, 3)), (3,))):
        assert weights.influence(loglik, quantities).shape == (4, 2, *shape)


def test_influence_of_a_quantity_that_does_not_vary_is_not_a_number() -> None:
    loglik = 0.1 * RNG.normal(size=(80, 4))
    assert np.all(np.isnan(weights.influence(loglik, np.ones(80))))


def test_single_precision_likelihoods_are_converted_by_value() -> None:
    loglik = RNG.normal(size=(80, 4)).astype(np.float32)
    f = RNG.normal(size=80)
    assert np.array_equal(
        weights.influence(loglik, f), weights.influence(loglik.astype(np.float64), f)
    )
