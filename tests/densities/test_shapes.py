"""Shapes: broadcasting, named hyperparameters, kinds of arrays, and numbers of threads."""

from __future__ import annotations

from collections.abc import Iterator

import numpy as np
import pytest
from hypothesis import given, settings
from hypothesis import strategies as st

import steelyard as sy
from densities.reference import CASES, Case, draw
from steelyard import _core

SEED = 20_261_218
EACH = pytest.mark.parametrize("case", CASES, ids=lambda case: case.make.__name__)
SHAPES = [(), (1,), (5,), (4, 1), (1, 5), (4, 5), (3, 1, 1), (3, 4, 1), (3, 1, 5), (3, 4, 5)]


def hyper_arrays(case: Case, shapes: list[tuple[int, ...]], seed: int) -> list[np.ndarray]:
    """Random hyperparameters, each of its own shape; limits keep their order."""
    full = np.array([h for h, _ in draw(case, seed, 60)]).T
    arrays = []
    for row, shape in zip(full, shapes, strict=False):
        arrays.append(row[: int(np.prod(shape))].reshape(shape))
    if case.make is sy.Uniform:
        arrays[1] = arrays[1] + full[0].max() - full[1].min() + 1
    return arrays


@EACH
def test_hyperparameters_of_any_broadcastable_shape(case: Case) -> None:
    rng = np.random.default_rng(SEED)
    x = np.array([v for _, v in draw(case, SEED, 60)]).reshape(3, 4, 5)
    if case.make is sy.Binomial:
        x = np.minimum(x, 1.0)
    for _ in range(12):
        shapes = [SHAPES[i] for i in rng.integers(0, len(SHAPES), size=3)]
        hyper = hyper_arrays(case, shapes, SEED)
        got = case.make(*hyper).log_density(x)
        assert got.shape == x.shape
        spread = [np.broadcast_to(h, x.shape).reshape(-1) for h in hyper]
        alone = [
            float(case.make(*h).log_density(v))
            for v, *h in zip(x.reshape(-1), *spread, strict=True)
        ]
        # Bit for bit: an entry does not know its neighbours.
        np.testing.assert_array_equal(got.reshape(-1), alone)
        slopes = case.make(*hyper).hyper_gradient(x)
        assert all(s.shape == x.shape for s in slopes.values())


@EACH
def test_a_named_hyperparameter_equals_an_array_of_its_draws(case: Case) -> None:
    pairs = draw(case, SEED + 1, 8)
    names = [f"h{k}" for k in range(len(pairs[0][0]))]
    draws = {name: np.array([h[k] for h, _ in pairs]) for k, name in enumerate(names)}
    if case.make is sy.Uniform:
        draws["h1"] = draws["h1"].max() + np.abs(draws["h0"]).max() + draws["h1"] ** 2
    x = np.array([v for _, v in pairs])[:, None] * np.ones(3)
    named, spelt = case.make(*names), case.make(*(draws[n][:, None] for n in names))
    np.testing.assert_array_equal(named.log_density(x, draws), spelt.log_density(x))
    looked_up = named.log_density(x, look_up=draws.__getitem__)
    np.testing.assert_array_equal(looked_up, spelt.log_density(x))
    for name, slope in named.hyper_gradient(x, draws).items():
        np.testing.assert_array_equal(slope, spelt.hyper_gradient(x)[name])
    low, high = named.support(x.shape, draws)
    assert np.broadcast_shapes(low.shape, high.shape, x.shape) == x.shape


def test_a_value_may_be_smaller_than_its_hyperparameters() -> None:
    assert sy.Normal([0.0, 1.0, 2.0], 1).log_density(0.5).shape == (3,)
    assert sy.Gamma([[1.0], [2.0]], [1.0, 2.0]).gradient([0.5, 0.6]).shape == (2, 2)


@pytest.mark.parametrize("shape", [(0,), (0, 3), (3, 0)])
def test_empty_values_give_empty_results(shape: tuple[int, ...]) -> None:
    for distribution in (
        sy.Normal(0, 1),
        sy.Beta(2, 3),
        sy.Poisson(2),
        sy.Truncated(sy.Cauchy(0, 1), 0),
    ):
        assert distribution.log_density(np.empty(shape)).shape == shape
        assert all(s.shape == shape for s in distribution.hyper_gradient(np.empty(shape)).values())


@pytest.mark.parametrize(
    "change",
    [
        lambda x: x.astype(np.float32),
        lambda x: np.asfortranarray(x),
        lambda x: x[::-1, ::-1],
        lambda x: np.stack([x, x], axis=-1)[..., 0],
        lambda x: x.astype(">f8"),
        lambda x: x.tolist(),
        lambda x: (
            np.frombuffer(b"0" + x.tobytes(), dtype=np.uint8)[1:].view(np.float64).reshape(x.shape)
        ),
    ],
    ids=["float32", "Fortran", "reversed", "strided", "byte-swapped", "list", "misaligned"],
)
def test_any_kind_of_array_is_read(change: object) -> None:
    x = np.random.default_rng(SEED).gamma(2, size=(40, 3)).astype(np.float32).astype(float)
    for distribution in (sy.Gamma(2, [1.0, 2.0, 3.0]), sy.Normal(0, 1)):
        want = distribution.log_density(np.array(change(x), dtype=float))
        np.testing.assert_array_equal(distribution.log_density(change(x)), want)


@pytest.fixture
def threads() -> Iterator[None]:
    before = _core.threads()
    yield
    _core.set_threads(before)


@EACH
def test_bits_do_not_depend_on_the_number_of_threads(case: Case, threads: None) -> None:
    hyper, value = draw(case, SEED + 2, 1)[0]
    rng = np.random.default_rng(SEED)
    x = value * rng.uniform(0.9, 1.1, size=40_000)
    x = np.round(x) if case.is_discrete else x
    results = []
    for count in (1, 2, 7):
        _core.set_threads(count)
        results.append(case.make(*hyper).log_density(x))
        results.append(case.make(*(np.full(x.size, h) for h in hyper)).log_density(x))
    for other in results[1:]:
        np.testing.assert_array_equal(results[0], other)


@settings(max_examples=60, deadline=None, derandomize=True)
@given(
    size=st.integers(1, 700),
    at=st.integers(0, 699),
    bad=st.sampled_from([np.nan, np.inf, -np.inf, 0.0, -1.0, 5e-324, 1e308]),
)
def test_a_rare_value_does_not_change_its_neighbours(size: int, at: int, bad: float) -> None:
    x = np.linspace(0.01, 0.99, size)
    spoilt = x.copy()
    spoilt[at % size] = bad
    keep = np.arange(size) != at % size
    for distribution in (sy.Gamma(2, 3), sy.Beta(2, 3), sy.StudentT(3, 0, 1), sy.LogNormal(0, 1)):
        got, want = distribution.log_density(spoilt), distribution.log_density(x)
        np.testing.assert_array_equal(got[keep], want[keep])
        assert got[at % size] == pytest.approx(float(distribution.log_density(bad)), nan_ok=True)


def test_the_kernel_refuses_what_does_not_fit() -> None:
    x, out, one = np.zeros(4), np.empty(4), np.ones(1)
    with pytest.raises(ValueError, match=r"family: expected one of normal, .*, got 'norm'"):
        _core.log_density("norm", x, [one, one], 1, out)
    with pytest.raises(ValueError, match=r"hyper: expected shape \(2,\), got \(1,\)"):
        _core.log_density("normal", x, [one], 1, out)
    with pytest.raises(ValueError, match=r"out: expected shape \(4,\), got \(3,\)"):
        _core.log_density("normal", x, [one, one], 1, out[:3])
    with pytest.raises(ValueError, match=r"hyper: expected shape \(1,\), got \(2,\)"):
        _core.log_density("normal", x, [one, np.ones(2)], 1, out)
    with pytest.raises(ValueError, match="hyper: expected at least one entry"):
        _core.log_density("normal", x, [np.empty(0), np.empty(0)], 1, out)
    with pytest.raises(TypeError, match="contiguous"):
        _core.log_density("normal", np.zeros(8)[::2], [one, one], 1, out)
    with pytest.raises(ValueError, match=r"x: expected shape \(4,\), got \(3,\)"):
        _core.gamma_tails(np.ones(4), np.ones(3))
