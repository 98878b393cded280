"""Arrays of unusual layout are accepted wherever the plain one is, and give the same answer."""

from __future__ import annotations

from collections.abc import Callable
from typing import Any

import numpy as np
import pytest

import steelyard as sy
from steelyard.errors import ArgumentTypeError, QuantityError, RatioError, ShapeError

from .telling import refused

Array = np.ndarray
SHAPE = (4, 50)


def _misaligned(x: Array) -> Array:
    buffer = np.zeros(x.nbytes + 1, dtype=np.uint8)
    out = buffer[1:].view(np.float64).reshape(x.shape)
    out[...] = x
    assert not out.flags.aligned
    return out


def _read_only(x: Array) -> Array:
    out = x.copy()
    out.flags.writeable = False
    return out


def _negative_strides(x: Array) -> Array:
    out = np.flip(np.flip(x).copy())
    assert min(out.strides) < 0
    return out


def _strided(x: Array) -> Array:
    wide = np.zeros((x.shape[0], 2 * x.shape[1], *x.shape[2:]))
    wide[:, ::2] = x
    return wide[:, ::2]


KINDS: dict[str, Callable[[Array], Any]] = {
    "byte-swapped": lambda x: x.astype(x.dtype.newbyteorder()),
    "misaligned": _misaligned,
    "read-only": _read_only,
    "negative strides": _negative_strides,
    "strided": _strided,
    "column order": np.asfortranarray,
    "list": lambda x: x.tolist(),
    "matrix rows of float128": lambda x: x.astype(np.longdouble),
}
KIND = pytest.mark.parametrize("kind", KINDS)


@pytest.fixture(scope="module")
def x() -> Array:
    return np.random.default_rng(20_261_224).normal(size=SHAPE)


@pytest.fixture(scope="module")
def loglik() -> Array:
    return 0.1 * np.random.default_rng(20_261_225).normal(size=(*SHAPE, 3))


def _bits(answer: sy.Answer, quantity: Any = "x") -> tuple[bytes, float, float]:
    estimate = answer.mean(quantity)
    return answer.log_weights.tobytes(), float(estimate.value), float(estimate.error)


@KIND
def test_draws_of_any_layout_give_the_plain_answer(kind: str, x: Array) -> None:
    change = sy.log_ratio(lambda draws: 0.3 * draws["x"])
    plain = sy.Fit({"x": x}).reweigh(change)
    assert _bits(sy.Fit({"x": KINDS[kind](x)}).reweigh(change)) == _bits(plain)


@KIND
def test_log_likelihoods_of_any_layout_give_the_plain_answer(
    kind: str, x: Array, loglik: Array
) -> None:
    change = sy.power(likelihood=0.7)
    plain = sy.Fit({"x": x}, loglik=loglik).reweigh(change)
    assert _bits(sy.Fit({"x": x}, loglik=KINDS[kind](loglik)).reweigh(change)) == _bits(plain)


@KIND
def test_log_ratios_and_quantities_of_any_layout_give_the_plain_answer(kind: str, x: Array) -> None:
    other = KINDS[kind](x)
    assert _bits(sy.weigh(other), other) == _bits(sy.weigh(x), x)
    fit = sy.Fit({"x": x})
    assert _bits(fit.reweigh(sy.log_ratio(other))) == _bits(fit.reweigh(sy.log_ratio(x)))


@KIND
def test_base_weights_and_prior_arrays_of_any_layout_give_the_plain_answer(
    kind: str, x: Array
) -> None:
    other, change = KINDS[kind](x), sy.power(prior=0.5)
    plain = sy.Fit({"x": x}, {"any": x}, log_weights=x).reweigh(change)
    assert _bits(sy.Fit({"x": x}, {"any": other}, log_weights=other).reweigh(change)) == _bits(
        plain
    )


@KIND
def test_weights_functions_take_any_layout(kind: str, x: Array) -> None:
    other = KINDS[kind](x)
    for axis in (0, 1, (0, 1)):
        for function in (
            sy.weights.normalise,
            sy.weights.log_sum_exp,
            sy.weights.effective_size,
            sy.weights.largest_share,
            sy.weights.tail_shape,
            lambda a, axis: sy.weights.smooth(a, axis).log_weights,
        ):
            got, want = function(other, axis), function(x, axis)
            assert np.array_equal(np.asarray(got), np.asarray(want))


@pytest.mark.parametrize("dtype", [np.float32, np.float16, np.int64, np.uint8, np.int8])
def test_narrow_numbers_are_converted_exactly(dtype: Any) -> None:
    x = np.random.default_rng(20_261_226).integers(0, 5, size=SHAPE).astype(dtype)
    assert _bits(sy.weigh(x), x) == _bits(sy.weigh(x.astype(np.float64)), x.astype(np.float64))


DOORS: dict[str, tuple[Callable[[sy.Fit, Any], Any], str]] = {
    "quantity": (lambda fit, v: fit.base.mean(v), "quantity"),
    "log ratio": (lambda fit, v: fit.reweigh(sy.log_ratio(v)), "log_ratio"),
    "bare log ratio": (lambda fit, v: sy.weigh(v), "log_ratio"),
    "log likelihood": (lambda fit, v: sy.Fit(fit.draws, loglik=v), "loglik"),
    "added likelihood": (lambda fit, v: fit.reweigh(sy.add({"new": v})), "add['new']"),
    "prior": (lambda fit, v: sy.Fit(fit.draws, {"any": v}), "prior['any']"),
    "base weights": (lambda fit, v: sy.Fit(fit.draws, log_weights=v), "log_weights"),
    "stored log density": (
        lambda fit, v: sy.Fit(fit.draws, stored_log_density=v),
        "stored_log_density",
    ),
    "weights function": (lambda fit, v: sy.weights.normalise(v), "log_ratio"),
    "quantile": (lambda fit, v: sy.weights.quantile(v, np.zeros(200), 0.5), "x"),
    "quantile weights": (lambda fit, v: sy.weights.quantile(np.zeros(200), v, 0.5), "log_weights"),
    "influence": (lambda fit, v: sy.weights.influence(v, np.zeros(200)), "loglik"),
    "resampling": (lambda fit, v: sy.weights.resample(v, 3), "log_weights"),
    "efficiency": (
        lambda fit, v: sy.weights.smooth(np.zeros(200), relative_efficiency=v),
        "relative_efficiency",
    ),
}
DOOR = pytest.mark.parametrize("door", DOORS)


@DOOR
@pytest.mark.parametrize(
    "values",
    [
        np.ones(200, dtype=object),
        np.ones(200, dtype=complex),
        np.ones(200).astype(str),
        np.zeros(200, dtype="M8[s]"),
    ],
    ids=["object", "complex", "text", "time"],
)
def test_arrays_that_are_not_real_numbers_are_refused_at_every_door(
    door: str, values: Array, x: Array
) -> None:
    act, argument = DOORS[door]
    told = refused(lambda: act(sy.Fit({"x": x}), values), ArgumentTypeError, argument)
    assert str(values.dtype) in told.came


@DOOR
def test_ragged_lists_are_refused_at_every_door(door: str, x: Array) -> None:
    act, argument = DOORS[door]
    told = refused(lambda: act(sy.Fit({"x": x}), [[0.0], [0.0, 1.0]]), ShapeError, argument)
    assert "ragged" in told.came


@DOOR
def test_masked_entries_are_refused_at_every_door(door: str, x: Array) -> None:
    act, argument = DOORS[door]
    values = np.ma.masked_array(np.zeros(200), mask=np.arange(200) == 3)
    refused(lambda: act(sy.Fit({"x": x}), values), ArgumentTypeError, argument, "1 masked")


@DOOR
def test_arrays_of_nothing_are_refused_at_every_door(door: str, x: Array) -> None:
    act, argument = DOORS[door]
    with pytest.raises(sy.errors.SteelyardError) as caught:
        act(sy.Fit({"x": x}), np.empty(0))
    assert argument in caught.value.argument


@pytest.mark.parametrize("shape", [(199,), (50, 4), (3, 50), (200, 0), (4, 50, 0)])
def test_quantities_that_are_not_shaped_like_the_draws_are_refused(
    shape: tuple[int, ...], x: Array
) -> None:
    fit = sy.Fit({"x": x})
    if 0 in shape:
        with pytest.raises(sy.errors.SteelyardError):
            fit.base.mean(np.empty(shape))
    else:
        refused(lambda: fit.base.mean(np.ones(shape)), ShapeError, "quantity", shape, "(4, 50, …)")


@pytest.mark.parametrize("bad", [np.nan, np.inf, -np.inf])
def test_quantities_that_are_not_finite_are_refused_with_their_place(bad: float, x: Array) -> None:
    values = x.copy()
    values[3, 2] = bad
    fit = sy.Fit({"x": x})
    refused(lambda: fit.base.mean(values), QuantityError, "quantity", "chain 3, draw 2")
    refused(lambda: fit.base.mean(lambda d: values), QuantityError, "quantity", "chain 3, draw 2")


@pytest.mark.parametrize("bad", [np.nan, np.inf])
def test_weights_functions_name_the_first_bad_entry(bad: float, x: Array) -> None:
    values = x.copy()
    values[2, 3] = bad
    for function in (sy.weights.normalise, sy.weights.tail_shape, sy.weights.largest_share):
        told = refused(lambda f=function: f(values, 1), RatioError, "log", "1 NaN or +inf")
        assert "draw 3, column 2" in told.came
