"""Posteriors of disjoint data: the product, with the prior counted once."""

from __future__ import annotations

from collections.abc import Callable, Sequence
from typing import Any

import numpy as np
import pytest

import steelyard as sy

SEED = 20_261_212
READINGS = [
    np.random.default_rng([SEED, part]).normal(1.0, 1.0, n) for part, n in enumerate((8, 12, 6))
]
PRIOR_SD = 2.0


def loglik(readings: np.ndarray) -> Callable[[Any], np.ndarray]:
    return lambda draws: -0.5 * (readings - draws["mu"][:, None]) ** 2


def posterior(readings: Sequence[np.ndarray]) -> tuple[float, float]:
    every = np.concatenate(readings)
    precision = 1 / PRIOR_SD**2 + len(every)
    return float(every.sum() / precision), precision**-0.5


def fitted(rng: np.random.Generator, part: int, *, called: bool) -> sy.Fit:
    mean, sd = posterior([READINGS[part]])
    mu = mean + sd * rng.normal(size=(4, 500))
    term = loglik(READINGS[part])
    held = term if called else term({"mu": mu.reshape(-1)})
    return sy.Fit({"mu": mu}, {"mu": sy.Normal(0, PRIOR_SD)}, {"readings": held})


@pytest.mark.parametrize("called", [True, False])
def test_the_product_counts_the_prior_once(called: bool) -> None:
    rng = np.random.default_rng(SEED)
    pool = sy.pool([fitted(rng, p, called=called) for p in range(3)], data="disjoint")
    mean, sd = posterior(READINGS)
    found = pool.base
    # Moments of the approximation: each fit's mean is known to sd/√2000, a tenth of their product.
    slack = 0.0 if called else 0.02
    assert abs(found.mean("mu").value - mean) < 4 * found.mean("mu").error + slack
    assert abs(found.sd("mu").value - sd) < 4 * found.sd("mu").error + slack
    codes = [r.code for r in found.verdict.reasons]
    assert ("pool_approximate" in codes) is not called
    twice = (np.concatenate(READINGS).sum()) / (3 / PRIOR_SD**2 + 26)
    assert abs(twice - mean) > 4 * found.mean("mu").error


def test_parts_can_be_dropped_again() -> None:
    rng = np.random.default_rng(SEED)
    pool = sy.pool({f"crew {p}": fitted(rng, p, called=True) for p in range(3)}, data="disjoint")
    found = pool.reweigh(sy.drop("crew 2: readings"))
    assert abs(found.mean("mu").value - posterior(READINGS[:2])[0]) < 4 * found.mean("mu").error
    left = pool.leave_out(term="crew 0: readings")
    assert left.by_group.value.shape == (8,)


def test_a_pool_may_be_exact_in_part() -> None:
    rng = np.random.default_rng(SEED)
    fits = [fitted(rng, p, called=p != 1) for p in range(3)]
    found = sy.pool(fits, data="disjoint").base
    assert abs(found.mean("mu").value - posterior(READINGS)[0]) < 4 * found.mean("mu").error + 0.02
    reason = next(r for r in found.verdict.reasons if r.code == "pool_approximate")
    assert reason.figure == 1


def test_positive_parameters_are_approximated_on_the_log_scale() -> None:
    """Gamma posteriors of a rate: shapes and rates add up, the prior's counted once."""
    rng = np.random.default_rng(SEED)
    fits = []
    for shape, rate in ((30, 20), (50, 30)):
        x = rng.gamma(2 + shape, 1 / (1 + rate), size=(4, 1000))
        held = shape * np.log(x) - rate * x
        fits.append(sy.Fit({"x": x}, {"x": sy.Gamma(2, 1)}, {"counts": held}))
    found = sy.pool(fits, data="disjoint").base
    mean, sd = 82 / 51, 82**0.5 / 51
    # A gamma of shape 30 is near a log normal: their means differ by less than 1 % of the sd.
    assert abs(found.mean("x").value - mean) < 4 * found.mean("x").error + 0.1 * sd
    assert found.sd("x").value == pytest.approx(sd, rel=0.06)
    assert (found.draws["x"] > 0).all()
