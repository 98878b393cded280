"""Newcomb's passage times of family 1: normal and Student-t errors, exact posterior draws."""

from __future__ import annotations

import functools
from collections.abc import Mapping
from typing import Any

import numpy as np
from numpy.typing import NDArray
from scipy import stats

from . import reference
from .rejection import draw_by_rejection

Array = NDArray[np.float64]

SIZE = 50_000
INPUTS = reference.case("P1.5")["inputs"]
_TIMES = np.array(INPUTS["y"])
_PRIOR_MEAN, _PRIOR_SD = INPUTS["mu_prior"]
SCALE_OF_SIGMA = float(INPUTS["sigma_prior_half_cauchy_scale"])


def _standardised(draws: Mapping[str, Array]) -> Array:
    return (_TIMES - draws["mu"][:, None]) / draws["sigma"][:, None]


def normal_loglik(draws: Mapping[str, Array]) -> Array:
    """Log densities of the 66 times under normal errors, ``(n, 66)``."""
    return stats.norm.logpdf(_standardised(draws)) - np.log(draws["sigma"])[:, None]


def student_loglik(draws: Mapping[str, Array]) -> Array:
    """The same under Student-t errors of four degrees of freedom."""
    errors = stats.t.logpdf(_standardised(draws), INPUTS["nu"])
    return errors - np.log(draws["sigma"])[:, None]


@functools.cache
def posterior_draws(errors: str) -> dict[str, Any]:
    """Exact independent draws under ``"normal"`` or ``"student"`` errors, seed 1882.

    Drawn in (mu, log sigma), so the density carries the Jacobian sigma.
    """
    loglik = {"normal": normal_loglik, "student": student_loglik}[errors]

    def log_density(points: Array) -> Array:
        # 66 log densities a point: blocks keep the working memory small.
        return np.concatenate([block_density(b) for b in np.array_split(points, _blocks(points))])

    def block_density(points: Array) -> Array:
        draws = {"mu": points[:, 0], "sigma": np.exp(points[:, 1])}
        log_prior = stats.norm.logpdf(draws["mu"], _PRIOR_MEAN, _PRIOR_SD)
        log_prior += stats.halfcauchy.logpdf(draws["sigma"], scale=SCALE_OF_SIGMA)
        return log_prior + loglik(draws).sum(axis=1) + points[:, 1]

    points = draw_by_rejection(log_density, (27.0, 2.0), SIZE, np.random.default_rng(1882))
    return {"mu": points[:, 0].copy(), "sigma": np.exp(points[:, 1])}


def _blocks(points: Array) -> int:
    return 1 + len(points) // 5000
