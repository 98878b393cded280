"""What must not matter, on data that hypothesis chooses: the answer knows nothing of it."""

from __future__ import annotations

from typing import Any

import numpy as np
from hypothesis import assume, given, settings
from hypothesis import strategies as st
from hypothesis.extra import numpy as arrays

import steelyard as sy

from .profile import FIXED

# Multiples of a power of two: adding one such offset to another loses no digit.
EIGHTHS = st.integers(-80, 80).map(lambda number: number / 8)
OFFSETS = st.integers(-(2**30), 2**30).map(lambda number: number / 8)
ASKED: dict[str, Any] = {
    "mean": lambda answer, x: answer.mean(x),
    "sd": lambda answer, x: answer.sd(x),
    "quantile": lambda answer, x: answer.quantile(x, (0.1, 0.5, 0.9)),
    "central interval": lambda answer, x: answer.interval(x, 0.8),
    "shift": lambda answer, x: answer.shift(x),
}


@st.composite
def weighted(draw: st.DrawFn) -> tuple[np.ndarray, np.ndarray]:
    """Draws of a quantity and their log ratios, `(chain, draw)`; some of weight zero."""
    shape = draw(st.tuples(st.integers(1, 3), st.integers(6, 40)))
    x = draw(arrays.arrays(np.float64, shape, elements=EIGHTHS))
    ratio = draw(arrays.arrays(np.float64, shape, elements=EIGHTHS))
    zero = draw(arrays.arrays(np.bool_, shape, elements=st.booleans(), fill=st.just(False)))
    assume(not zero.all())
    return x, np.where(zero, -np.inf, ratio)


def same(one: sy.Estimate, other: sy.Estimate, what: str, scale: float) -> None:
    # 1e-9 of the largest value: a few hundred roundings of sums of at most 240 terms.
    for name in ("value", "error"):
        left, right = (np.asarray(getattr(e, name)) for e in (one, other))
        np.testing.assert_allclose(left, right, rtol=1e-9, atol=1e-9 * scale, err_msg=what)


def size(x: np.ndarray) -> float:
    return float(np.abs(x).max(initial=1.0))


@settings(FIXED)
@given(weighted(), OFFSETS)
def test_a_constant_in_the_log_ratio_changes_no_estimate(
    given_: tuple[np.ndarray, np.ndarray], offset: float
) -> None:
    x, ratio = given_
    one, other = sy.weigh(ratio), sy.weigh(ratio + offset)
    assert one.tail_shape == other.tail_shape
    for what, ask in ASKED.items():
        same(ask(one, x), ask(other, x), what, size(x))


@settings(FIXED)
@given(weighted(), st.randoms(use_true_random=False))
def test_the_order_of_unordered_draws_changes_no_estimate(
    given_: tuple[np.ndarray, np.ndarray], random: Any
) -> None:
    x, ratio = (a.reshape(-1) for a in given_)
    order = list(range(x.size))
    random.shuffle(order)
    one, other = (
        sy.Fit({"x": a}, chain=np.zeros(a.size, dtype=int), ordered=False).reweigh(
            sy.log_ratio(b), smooth=False
        )
        for a, b in ((x, ratio), (x[order], ratio[order]))
    )
    for what, ask in ASKED.items():
        same(ask(one, "x"), ask(other, "x"), what, size(x))


@settings(FIXED)
@given(weighted(), EIGHTHS, st.booleans())
def test_equal_weights_give_the_unweighted_answer(
    given_: tuple[np.ndarray, np.ndarray], level: float, smooth: bool
) -> None:
    x, _ = given_
    answer = sy.weigh(np.full(x.shape, level), {"x": x}, smooth=smooth)
    base = sy.Fit({"x": x}).base
    for what, ask in ASKED.items():
        same(ask(answer, "x"), ask(base, "x"), what, size(x))
    # Hyndman and Fan's type 5, which equal weights must give, does not merge ties: without them.
    apart = x + np.arange(x.size).reshape(x.shape) / 2**10
    probs = (0.1, 0.5, 0.9)
    plain = np.quantile(apart, probs, method="hazen")
    # 1e-9, here and below: as in `same`.
    np.testing.assert_allclose(answer.quantile(apart, probs).value, plain, atol=1e-9 * size(x))
    assert abs(answer.mean("x").value - x.mean()) <= 1e-9 * size(x)
    assert abs(answer.sd("x").value - x.std()) <= 1e-9 * size(x)
    assert abs(answer.effective_size - x.size) <= 1e-9 * x.size


@settings(FIXED)
@given(weighted(), arrays.arrays(np.float64, st.integers(1, 20), elements=EIGHTHS))
def test_draws_of_weight_zero_change_no_mean(
    given_: tuple[np.ndarray, np.ndarray], more: np.ndarray
) -> None:
    x, ratio = (a.reshape(-1) for a in given_)
    longer = np.concatenate([x, more])
    nothing = np.concatenate([ratio, np.full(more.size, -np.inf)])
    one, other = sy.weigh(ratio, smooth=False), sy.weigh(nothing, smooth=False)
    for what in ("mean", "sd", "quantile"):
        found, wanted = (
            np.asarray(ASKED[what](a, values).value) for a, values in ((other, longer), (one, x))
        )
        np.testing.assert_allclose(found, wanted, atol=1e-9 * size(longer), err_msg=what)
    assert abs(one.effective_size - other.effective_size) <= 1e-9 * x.size


@settings(FIXED)
@given(weighted())
def test_a_fit_twice_over_has_the_same_means_and_twice_the_effective_size(
    given_: tuple[np.ndarray, np.ndarray],
) -> None:
    x, ratio = given_
    one = sy.weigh(ratio, smooth=False)
    other = sy.weigh(np.concatenate([ratio, ratio]), smooth=False)
    for what in ("mean", "sd", "quantile"):
        found, wanted = (
            np.asarray(ASKED[what](a, values).value)
            for a, values in ((other, np.concatenate([x, x])), (one, x))
        )
        np.testing.assert_allclose(found, wanted, atol=1e-9 * size(x), err_msg=what)
    assert abs(other.effective_size - 2 * one.effective_size) <= 1e-9 * x.size
    assert abs(other.entropy_size - 2 * one.entropy_size) <= 1e-9 * x.size
