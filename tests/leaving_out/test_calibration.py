"""Probability integral transforms: closed forms, counts, bands with the promised false alarm."""

from __future__ import annotations

import numpy as np
import pytest
from scipy import stats

import steelyard as sy
from steelyard.leaving_out import LeaveOut, leave_out
from steelyard.leaving_out.uniformity import band_of, grid_of

from . import cases
from .models import Array, Regression, poisson_loglik, regression_loglik

SEED = 64


def _stack_loss(draws_wanted: int) -> tuple[LeaveOut, dict[str, Array], Array, Array]:
    X, y = cases.data("P2.1", "X"), cases.data("P2.1", "y")
    draws = Regression.reference_prior(X, y).draws(np.random.default_rng(SEED), draws_wanted)
    fit = sy.Fit(draws, loglik=regression_loglik(draws, X, y), ordered=False)
    return leave_out(fit._record), draws, X, y


def test_transforms_are_those_of_the_left_out_students_t() -> None:
    """P2.1: location and scale of each row's left-out Student-t with 16 degrees of freedom."""
    left, draws, X, y = _stack_loss(40_000)
    exact = stats.t.cdf(
        y,
        len(y) - 1 - X.shape[1],
        cases.expected("P2.1", "deletion_location"),
        cases.expected("P2.1", "deletion_scale"),
    )
    centre, spread = draws["beta"] @ X.T, np.sqrt(draws["variance"])[:, None]
    smooth = left.calibration(cdf=stats.norm.cdf(y, centre, spread))
    noise = np.random.default_rng(SEED + 1).normal(size=centre.shape)
    drawn = left.calibration(y, centre + spread * noise)
    # A probability from ESS weighted draws: four times 1/(2 sqrt ESS), row 21 (shape 0.6) wider.
    limit = 2 / np.sqrt(left.effective_size)
    assert np.all(np.abs(smooth.transform - exact) < limit)
    assert np.all(np.abs(drawn.transform - exact) < limit)
    np.testing.assert_array_equal(smooth.below, smooth.reached)
    assert smooth.is_inside
    assert "nothing against calibration" in smooth.sentence


def _counts(rate: float, model: float, count: int = 200) -> tuple[LeaveOut, Array, Array]:
    """Poisson counts with rate `rate`, claimed to scatter `model` times as much about it."""
    y = np.random.default_rng(SEED).poisson(rate, size=count).astype(float)
    draws = np.random.default_rng(SEED + 1).gamma(2 + y.sum(), 1 / (1 + count), size=2000) * model
    fit = sy.Fit({"rate": draws}, loglik=poisson_loglik(draws, y), ordered=False)
    return leave_out(fit._record), draws, y


def test_counts_are_randomised_between_their_two_values() -> None:
    left, rate, y = _counts(3.0, 1.0)
    at, below = (stats.poisson.cdf(y - k, rate[:, None]) for k in (0, 1))
    found = left.calibration(cdf=at, cdf_below=below, rng=5)
    assert np.all(found.transform >= found.below)
    assert np.all(found.transform <= found.reached)
    again = left.calibration(cdf=at, cdf_below=below, rng=5)
    np.testing.assert_array_equal(found.transform, again.transform)
    other = left.calibration(cdf=at, cdf_below=below, rng=6)
    assert np.any(found.transform != other.transform)
    assert found.is_inside
    # Czado, Gneiting and Held's form is the expectation over the randomisation.
    u = np.random.default_rng(1).random((4000, len(y)))
    many = found.below + u * (found.reached - found.below)
    share = (many[..., None] <= found.grid[::10]).mean(axis=(0, 1))
    # 4,000 × 200 uniforms: four errors of a share are below 0.0023.
    np.testing.assert_allclose(found.share_smooth[::10], share, atol=0.0023)
    drawn = np.random.default_rng(2).poisson(rate[:, None], size=(2000, len(y))).astype(float)
    by_draws = left.calibration(y, drawn, rng=5)
    assert np.all(np.abs(by_draws.reached - found.reached) < 2 / np.sqrt(1500))
    assert np.all(np.abs(by_draws.below - found.below) < 2 / np.sqrt(1500))


def test_predictions_that_are_too_low_are_told() -> None:
    left, rate, y = _counts(3.0, 1.0)
    shifted = stats.poisson.cdf(y, rate[:, None] * 0.6)
    below = stats.poisson.cdf(y - 1, rate[:, None] * 0.6)
    found = left.calibration(cdf=shifted, cdf_below=below, rng=1)
    assert not found.is_inside
    assert "above what is predicted" in found.sentence


@pytest.mark.parametrize(("scale", "words"), [(0.5, "too narrow"), (2.0, "too wide")])
def test_predictions_of_a_wrong_width_are_told(scale: float, words: str) -> None:
    rng = np.random.default_rng(SEED)
    y = rng.normal(size=300)
    mu = rng.normal(size=1000) / np.sqrt(300)
    loglik = stats.norm.logpdf(y, mu[:, None], 1.0)
    left = leave_out(sy.Fit({"mu": mu}, loglik=loglik, ordered=False)._record)
    found = left.calibration(cdf=stats.norm.cdf(y, mu[:, None], scale))
    assert not found.is_inside
    assert words in found.sentence


@pytest.mark.parametrize("count", [8, 100, 3000])
def test_the_band_is_left_as_often_as_it_says(count: int) -> None:
    """5 % over 2,000 samples of uniforms: four errors are 2 %, the band's own level 0.4 %.

    False alarm 6.3e-5 for each of three sizes. Eight uniforms lie on a lattice: at most 5 %.
    """
    grid = grid_of(count)
    lower, upper = band_of(count, grid, 0.95)
    u = np.sort(np.random.default_rng(SEED).random((2000, count)), axis=1)
    share = np.stack([np.searchsorted(row, grid, side="right") / count for row in u])
    left = float(((share < lower) | (share > upper)).any(axis=1).mean())
    assert left < 0.05 + 0.024
    if count > 8:
        assert left > 0.05 - 0.024
