"""Parameters carried to the real space and back: exactly, and with the right Jacobian."""

from __future__ import annotations

from collections.abc import Mapping

import mpmath
import numpy as np
import pytest
from numpy.typing import NDArray

import steelyard as sy
from steelyard.repair import evaluator_of
from steelyard.repair.space import Space

Array = NDArray[np.float64]
N = 40
SEED = 20_261_201


def _draws() -> dict[str, Array]:
    rng = np.random.default_rng(SEED)
    top = rng.uniform(5, 6, size=N)
    return {
        "plain": rng.normal(size=N),
        "positive": rng.gamma(2, size=N),
        "above three": 3 + rng.gamma(2, size=(N, 2)),
        "below": -1 - rng.gamma(2, size=N),
        "between": rng.uniform(-1, 2, size=(N, 2)),
        "top": top,
        "under top": top * rng.uniform(size=N),
        "shares": rng.dirichlet([4.0, 5.0, 6.0, 3.0], size=N),
        "matrix": sy.LKJCorrelation(1.5).sample((N, 4, 4), rng=3),
        "cut": np.sort(rng.normal(size=(N, 4)), axis=1),
        "steps": np.sort(rng.uniform(0, 1, size=(N, 3)), axis=1),
    }


PRIOR = {
    "under top": sy.Uniform(0, "top"),  # stated before the limit that it names
    "plain": sy.Normal(0, 1),
    "positive": sy.HalfNormal(1),
    "above three": sy.Pareto(2, 3),
    "below": sy.Truncated(sy.Normal(0, 3), upper=-1),
    "between": sy.Uniform(-1, 2),
    "top": sy.Uniform(5, 6),
    "shares": sy.Dirichlet(1.0),
    "matrix": sy.LKJCorrelation(1.5),
    "cut": sy.Normal(0, 3),
    "steps": sy.Beta(1, 1),
}
# Elements that a density is about: all shares but the last, correlations below the diagonal.
FREE = {
    "shares": (slice(None), slice(0, 3)),
    "matrix": (slice(None), *np.tril_indices(4, -1)),
}


def _fit(draws: dict[str, Array]) -> sy.Fit:
    prior = {k: PRIOR[k] for k in PRIOR if k in draws}
    return sy.Fit(draws, prior, _no_data, chain=np.zeros(N, dtype=int))


def _no_data(draws: Mapping[str, Array]) -> Array:
    return np.zeros(len(next(iter(draws.values()))))


def _space(draws: dict[str, Array]) -> Space:
    ascending = [name for name in ("cut", "steps") if name in draws]
    return evaluator_of(_fit(draws)._record, ascending=ascending).space


def _flat(space: Space, x: Array) -> Array:
    points, _ = space.points(x)
    parts = [points[k][FREE.get(k, (slice(None),))].reshape(len(x), -1) for k in points]
    return np.concatenate(parts, axis=1)


def test_draws_come_back_from_the_real_space() -> None:
    draws = _draws()
    space = _space(draws)
    x = space.free(_fit(draws).draws)
    assert x.shape == (N, space.size)
    assert space.size == 1 + 1 + 2 + 1 + 2 + 1 + 1 + 3 + 6 + 4 + 3
    points, _ = space.points(x)
    for name, values in draws.items():
        # Two logs and exponentials, of numbers that are some tens at most.
        np.testing.assert_allclose(points[name], values, rtol=1e-11, atol=1e-12)


NAMES = [(n,) for n in PRIOR if n != "under top"]


@pytest.mark.parametrize("names", [*NAMES, ("top", "under top"), tuple(PRIOR)], ids=" and ".join)
def test_the_log_jacobian_is_the_log_determinant_of_the_derivatives(names: tuple[str, ...]) -> None:
    whole = _draws()
    draws = {k: whole[k] for k in names}
    space = _space(draws)
    x = space.free(_fit(draws).draws)[:6]
    _, log_jacobian = space.points(x)
    step = 1e-5
    for row in range(len(x)):
        moves = step * np.eye(space.size)
        slopes = (_flat(space, x[row] + moves) - _flat(space, x[row] - moves)) / (2 * step)
        # Central differences of smooth functions at 1e-5 leave some 1e-9 of each derivative.
        assert log_jacobian[row] == pytest.approx(np.linalg.slogdet(slopes)[1], abs=1e-6)


@pytest.mark.parametrize("x", [-30.0, -2.5, 0.0, 1.5, 20.0])
def test_limits_agree_with_fifty_digits(x: float) -> None:
    draws = {"between": np.full((N, 2), 0.5), "positive": np.ones(N)}
    space = _space(draws)
    points, log_jacobian = space.points(np.full((1, 3), x))
    with mpmath.workdps(50):
        part = 1 / (1 + mpmath.exp(-mpmath.mpf(x)))
        between = -1 + 3 * part
        slope = mpmath.log(3 * part * (1 - part))
        total = 2 * slope + mpmath.mpf(x)
    # A few roundings; the value itself is 2 less something that keeps its own digits.
    assert points["between"][0, 0] == pytest.approx(float(between), rel=1e-15)
    assert points["positive"][0] == pytest.approx(float(mpmath.exp(x)), rel=1e-15)
    assert log_jacobian[0] == pytest.approx(float(total), rel=1e-14)


def test_shares_near_zero_keep_their_digits() -> None:
    shares = np.array([[1e-200, 1e-9, 1 - 1e-9]] * N)
    space = _space({"shares": np.concatenate([shares / 1.0], axis=1)})
    x = space.free(_fit({"shares": shares}).draws)
    points, _ = space.points(x)
    np.testing.assert_allclose(points["shares"], shares, rtol=1e-12)


def test_coordinates_too_far_out_have_no_density_instead_of_a_wrong_one() -> None:
    evaluator = evaluator_of(_fit(_draws())._record, ascending=("cut", "steps"))
    x = np.tile(evaluator.start[:1], (3, 1))
    x[1] -= 1e4
    x[2] += 1e4
    base, target = evaluator.both(x)
    assert np.isfinite(base[0])
    assert base[1] == base[2] == target[1] == target[2] == -np.inf
