"""
The bindings on any array that hypothesis can make: a result of the right shape, or a refusal.

Layouts are numpy's worst: strides of any sign, steps over several entries, misaligned memory.
"""

from __future__ import annotations

import contextlib
from collections.abc import Callable
from typing import Any

import numpy as np
import pytest
from hypothesis import given, settings
from hypothesis import strategies as st
from hypothesis.extra import numpy as arrays

from steelyard import _core

from .exploring import OF_BINDINGS
from .profile import FIXED

NUMBERS = st.one_of(
    st.floats(),
    st.floats(-10, 10),
    st.sampled_from([0.0, -0.0, 1.0, np.inf, -np.inf, np.nan, 1.7e308, 5e-324]),
)


@st.composite
def matrices(draw: st.DrawFn, rows: int | None = None, columns: int | None = None) -> np.ndarray:
    n = draw(st.integers(0, 30)) if rows is None else rows
    k = draw(st.integers(0, 10)) if columns is None else columns
    step = draw(st.sampled_from([(1, 1), (2, 1), (1, 2), (3, 2)]))
    sign = draw(st.sampled_from([(1, 1), (-1, 1), (1, -1), (-1, -1)]))
    order = draw(st.sampled_from("CF"))
    offset = draw(st.sampled_from([0] * 18 + [4, 1]))
    room = (n * step[0], k * step[1])
    raw = np.zeros(8 * room[0] * room[1] + offset, dtype=np.uint8)[offset:]
    whole = np.ndarray(room, np.float64, raw, order=order)
    view = whole[:: step[0], :: step[1]]
    view[...] = draw(arrays.arrays(np.float64, (n, k), elements=NUMBERS))
    return view[:: sign[0], :: sign[1]]


@st.composite
def vectors(draw: st.DrawFn, size: int) -> np.ndarray:
    """Mostly of that size."""
    rows = draw(st.sampled_from([size] * 9 + [size + 1]))
    return draw(matrices(rows, 1))[:, 0]


def reduced(name: str) -> Callable[[Any, np.ndarray], Any]:
    return lambda draw, x: (getattr(_core, name)(x), (x.shape[1],))


def smoothed(draw: Any, x: np.ndarray) -> Any:
    out = draw(matrices(x.shape[0], x.shape[1]))
    return _core.smooth(x, draw(vectors(x.shape[1])), out), (x.shape[1],)


def normalised(draw: Any, x: np.ndarray) -> Any:
    return _core.normalise(x, draw(matrices(x.shape[0], x.shape[1]))), (x.shape[1],)


def long_run(draw: Any, z: np.ndarray) -> Any:
    starts = draw(st.lists(st.integers(-1, z.shape[0] + 1), max_size=4))
    good = draw(st.booleans())
    edges = sorted({0, z.shape[0], *(s for s in starts if 0 < s < z.shape[0])}) if good else starts
    return _core.long_run_variance(z, np.array(edges, dtype=np.int64), draw(st.booleans())), (
        z.shape[1],
    )


def quantiles(draw: Any, x: np.ndarray) -> Any:
    probs = draw(matrices(None, x.shape[1]))
    return _core.quantile(x, draw(vectors(x.shape[0])), probs), probs.shape


def resampled(draw: Any, x: np.ndarray) -> Any:
    def mostly(good: st.SearchStrategy[Any], *bad: Any) -> Any:
        return draw(st.one_of(good, good, good, st.sampled_from(bad)))

    # Sizes between these fit into memory on some machines only.
    size = mostly(st.integers(0, 50), -1, 2**50, 2**65)
    method = mostly(st.sampled_from(["systematic", "residual", "multinomial", "stratified"]), "?")
    usual = st.one_of(st.floats(0.1, 10), st.floats(0, 1e300))
    weights = arrays.arrays(np.float64, st.integers(1, 30), elements=usual, fill=st.just(1.0))
    w = mostly(weights, np.abs(x).ravel())
    key = mostly(st.just(b"k" * 32), b"")
    return _core.resample(w, size, method, key), (size,)


def influences(draw: Any, x: np.ndarray) -> Any:
    f = draw(matrices(x.shape[0]))
    return _core.influence(x, f), (x.shape[1], f.shape[1])


CALLS: dict[str, Callable[[Any, np.ndarray], Any]] = {
    **{name: reduced(name) for name in ("log_sum_exp", "largest_share", "mean_square")},
    "effective_size": lambda draw, x: (
        _core.effective_size(x, draw(st.booleans())),
        (x.shape[1],),
    ),
    "tail_shape": lambda draw, x: (
        _core.tail_shape(x, draw(vectors(x.shape[1]))),
        (x.shape[1],),
    ),
    "signed_tail_shape": lambda draw, x: (
        _core.signed_tail_shape(x, draw(vectors(x.shape[1]))),
        (x.shape[1],),
    ),
    "weighted_mean": lambda draw, x: (
        _core.weighted_mean(x, draw(vectors(x.shape[0]))),
        (x.shape[1],),
    ),
    "shortest_interval": lambda draw, x: (
        _core.shortest_interval(
            x,
            draw(vectors(x.shape[0])),
            draw(st.one_of(st.floats(0.01, 1), st.floats(0.01, 1), st.floats())),
        ),
        (2, x.shape[1]),
    ),
    "smooth": smoothed,
    "normalise": normalised,
    "long_run_variance": long_run,
    "quantile": quantiles,
    "resample": resampled,
    "influence": influences,
}


@pytest.mark.parametrize("name", CALLS)
def test_a_binding_returns_the_right_shape_or_refuses(name: str) -> None:
    answered = 0

    @settings(FIXED)
    @given(st.data())
    def search(data: st.DataObject) -> None:
        nonlocal answered
        x = data.draw(matrices())
        with contextlib.suppress(*OF_BINDINGS):
            result, shape = CALLS[name](data.draw, x)
            assert result.shape == shape
            answered += 1

    search()
    # Few of these calls fit together by chance; one that did shows that the call is wired right.
    assert answered >= 1, "always refused, so that nothing was learnt"


@settings(FIXED)
@given(matrices())
def test_a_layout_changes_no_bit(x: np.ndarray) -> None:
    plain = np.array(x)
    names = ("log_sum_exp", "largest_share", "mean_square")
    for name in names:
        kernel = getattr(_core, name)
        try:
            found = kernel(x)
        except ValueError:
            assert not x.flags.aligned
            return
        assert found.tobytes() == kernel(plain).tobytes(), name
        assert found.tobytes() == kernel(np.asfortranarray(plain)).tobytes(), name


@pytest.mark.parametrize("shape", [(5, 0), (0, 5), (0, 0)])
@pytest.mark.parametrize("order", ["C", "F"])
def test_an_array_without_entries_does_not_overlap_itself(
    shape: tuple[int, int], order: Any
) -> None:
    out = np.zeros(shape, order=order)
    assert _core.normalise(np.zeros(shape), out).shape == (shape[1],)
