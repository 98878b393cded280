"""Monte Carlo comparisons, and the plain twins that say what an honest error is."""

from __future__ import annotations

from typing import Any

import numpy as np
from numpy.typing import NDArray
from scipy import stats

Array = NDArray[np.float64]

ERRORS = 4.0
# One comparison of a normal deviate with four of its errors, both sides: 6.3e-5. A test states
# how many comparisons it makes; the seeds are fixed, so an alarm is not a flicker but a question.
FALSE_ALARM = 2 * float(stats.norm.sf(ERRORS))


def assert_within_errors(
    estimate: Any, expected: Any, accuracy: Any = 0.0, first_order_error: Any = None
) -> None:
    """Hold an Estimate to four of its own Monte Carlo errors.

    `accuracy` is how far the expected value itself may be off. With `first_order_error`, the exact
    asymptotic error at this number of draws, the value is held to four of that as well, so that
    an inflated reported error cannot excuse a wrong value.
    """
    value, error = np.asarray(estimate.value), np.asarray(estimate.error)
    deviation = np.abs(value - np.asarray(expected))
    assert np.all(np.isfinite(error)), f"the reported error is not finite: {error}"
    assert np.all(error > 0), f"no error is reported: {error}"
    assert np.all(deviation <= ERRORS * error + accuracy), (
        f"{value} is {deviation / error} reported errors from {expected}"
    )
    if first_order_error is not None:
        assert np.all(deviation <= ERRORS * np.asarray(first_order_error) + accuracy), (
            f"{value} is {deviation / first_order_error} exact errors from {expected}"
        )


def assert_error_is_honest(estimate: Any, independent_error: Any, at_least: float = 0.8) -> None:
    """Hold a reported error between 0.8 and 2 times one that was found without Steelyard.

    The lower limit leaves room for the noise of an estimated error, the upper one for the widening
    that heavy tails may call for: at most 1 / (1 - k) for a shape below one half.
    """
    share = np.asarray(estimate.error) / np.asarray(independent_error)
    assert np.all(share >= at_least), f"the error is understated: {share} of the independent one"
    assert np.all(share <= 2.0), f"the error is inflated: {share} of the independent one"


def plain_weights(log_ratio: Array) -> Array:
    """Normalised raw weights, by numpy alone."""
    raw = np.exp(log_ratio - np.max(log_ratio))
    return raw / np.sum(raw)


def plain_mean_error(values: Array, log_ratio: Array) -> Array:
    """Delta-method error of a self-normalised mean from independent draws, raw weights."""
    weights = plain_weights(log_ratio)
    centred = values - np.tensordot(weights, values, axes=1)
    return np.sqrt(np.tensordot(weights**2, centred**2, axes=1))


def plain_sd_error(values: Array, log_ratio: Array) -> Array:
    """Delta-method error of a self-normalised sd from independent draws, raw weights."""
    weights = plain_weights(log_ratio)
    centred = values - np.tensordot(weights, values, axes=1)
    variance = np.tensordot(weights, centred**2, axes=1)
    spread = np.tensordot(weights**2, (centred**2 - variance) ** 2, axes=1)
    return np.sqrt(spread / (4 * variance))


def plain_quantile_error(
    values: Array, log_ratio: Array, quantiles: Array, densities: Array
) -> Array:
    """Error of the distribution function at exact quantiles over the exact density there."""
    weights = plain_weights(log_ratio)[:, None]
    below = values[:, None] <= quantiles
    centred = below - np.sum(weights * below, axis=0)
    return np.sqrt(np.sum((weights * centred) ** 2, axis=0)) / densities


def assert_equal(*pair: Any, rtol: float = 1e-12, atol: float = 0.0) -> None:
    """Two routes to the same deterministic number; the default leaves rounding only."""
    np.testing.assert_allclose(*(np.asarray(x) for x in pair), rtol=rtol, atol=atol)
