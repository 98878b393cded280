"""Monte Carlo errors of means under equal weights: closed forms for AR(1), and a plain twin."""

from __future__ import annotations

import numpy as np
import pytest

import steelyard as sy

from . import twins

SEED = 20_261_211


def _reported(chains: np.ndarray) -> float:
    """Long-run variance behind the reported error of a mean under equal weights: S error²."""
    estimate = sy.weigh(np.zeros(chains.shape)).mean(chains)
    return float(chains.size * estimate.error**2)


@pytest.mark.parametrize("rho", [-0.4, 0.0, 0.3, 0.6, 0.9])
def test_the_long_run_variance_of_an_autoregression_is_its_closed_form(rho: float) -> None:
    # (1 + ρ)/(1 − ρ) for unit variance. 30 sets of 4 chains of 5,000: the mean of 30 is held to
    # 4.5 of its own errors plus 4 % for the bias of a truncated sequence (O(1/length), upwards).
    # False alarm 7e-6 for each ρ.
    rng = np.random.default_rng(SEED)
    found = np.array([_reported(twins.autoregression(rng, rho, 4, 5000)) for _ in range(30)])
    exact = (1 + rho) / (1 - rho)
    noise = found.std(ddof=1) / np.sqrt(len(found))
    assert abs(found.mean() - exact) <= 4.5 * noise + 0.04 * exact


@pytest.mark.parametrize("rho", [-0.9, -0.3, 0.0, 0.5, 0.95])
@pytest.mark.parametrize(("chains", "length"), [(1, 300), (2, 51), (4, 100), (5, 9), (3, 8)])
def test_the_long_run_variance_equals_a_plain_twin(rho: float, chains: int, length: int) -> None:
    # 1e-9 relative: sums of the same few hundred products in another order.
    rng = np.random.default_rng(SEED + 1)
    for _ in range(5):
        x = 3 + twins.autoregression(rng, rho, chains, length)
        twin = twins.long_run_variance([c - x.mean() for c in x])
        assert _reported(x) == pytest.approx(twin, rel=1e-9)


def test_chains_of_unequal_length_equal_the_plain_twin() -> None:
    rng = np.random.default_rng(SEED + 2)
    parts = [twins.autoregression(rng, 0.7, 1, n)[0] for n in (40, 201, 97)]
    x = np.concatenate(parts)
    fit = sy.Fit({"x": x}, chain=np.repeat([0, 1, 2], [40, 201, 97]))
    twin = twins.long_run_variance([p - x.mean() for p in parts])
    # 1e-9 relative: as above.
    assert len(x) * fit.base.mean("x").error ** 2 == pytest.approx(twin, rel=1e-9)


def test_chains_that_sit_apart_raise_the_error() -> None:
    # Four chains of unit noise about ±3: the mean of four such places is known to about 3/2,
    # whatever the length; a within-chain error would say 0.02.
    rng = np.random.default_rng(SEED + 3)
    x = rng.normal(size=(4, 2500)) + np.array([[-3.0], [3.0], [-3.0], [3.0]])
    assert sy.weigh(np.zeros(x.shape)).mean(x).error > 0.5


def test_an_antithetic_chain_has_a_smaller_error_but_never_none() -> None:
    # x, −x, x, −x …: the mean is exact, the sequence estimate 0; the floor is var / log10 S.
    x = np.tile([1.0, -1.0], 2000).reshape(4, 1000)
    assert _reported(x) == pytest.approx(1 / np.log10(4000), rel=1e-9)


def test_draws_without_order_have_the_error_of_independent_draws() -> None:
    x = twins.autoregression(np.random.default_rng(SEED + 4), 0.9, 4, 500)
    fit = sy.Fit({"x": x}, ordered=False)
    # 1e-12 relative: the same mean square twice.
    assert fit.base.mean("x").error == pytest.approx(x.std() / np.sqrt(x.size), rel=1e-12)


def test_effective_draws_are_the_variance_over_the_squared_error() -> None:
    x = twins.autoregression(np.random.default_rng(SEED + 5), 0.8, 4, 1000)
    estimate = sy.weigh(np.zeros(x.shape)).mean(x)
    assert estimate.effective_draws == pytest.approx(x.var() / estimate.error**2, rel=1e-9)
    # (1 − ρ)/(1 + ρ) of 4,000 draws is 444; one long-run variance of them has a relative error
    # of about a tenth, so a half is five of those: false alarm below 1e-5.
    assert estimate.effective_draws == pytest.approx(444, rel=0.5)


def test_a_constant_quantity_has_no_error() -> None:
    estimate = sy.weigh(np.zeros(100)).mean(np.full(100, 0.1))
    # A rounding of the mean (1e-17) is not a Monte Carlo error.
    assert estimate.value == pytest.approx(0.1, rel=1e-15)
    assert estimate.error < 1e-16
